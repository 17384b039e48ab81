"""The invented world: what ships is what the generator makes, and its stated truth can be recovered."""

from __future__ import annotations

from dataclasses import astuple
from hashlib import sha256
from importlib.resources import files
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
import pytest
import statsmodels.api as sm
from scipy.stats import nbinom

from steelyard.datasets.geography import great_circle_km
from steelyard.datasets.islands import (
    ISLANDS_TRUTH,
    SHIPPED_SEED,
    IslandsTables,
    generate_islands,
    write_islands,
)
from steelyard.datasets.reading import read_table

FOLDER = Path(str(files("steelyard.datasets")))
DEMO, OPEN = FOLDER / "demo_data", FOLDER / "open_data"
YEARS = (2029, 2030, 2031, 2032)


@pytest.fixture(scope="module")
def shipped() -> IslandsTables:
    return generate_islands(SHIPPED_SEED)


def dyads_of(tables: IslandsTables) -> pd.DataFrame:
    """All ordered pairs in all years with covariates, effects, tonnes (0 where unlisted) and pair number."""
    port = tables.ports.set_index("port")
    table = pd.concat([tables.routes.assign(year=year) for year in YEARS], ignore_index=True)
    table = table.merge(tables.flows, how="left", on=["year", "origin", "destination"])
    table["tonnes"] = table["tonnes"].fillna(0)
    for end in ("origin", "destination"):
        table[f"{end}_size"] = np.log(port["throughput"].loc[table[end]].to_numpy())
        effects = tables.effects.rename(columns={"port": end})[["year", end, f"{end}_effect"]]
        table = table.merge(effects, how="left", on=["year", end])
    language = port["language"]
    table["same"] = (
        language.loc[table["origin"]].to_numpy() == language.loc[table["destination"]].to_numpy()
    ).astype(float)
    low, high = table[["origin", "destination"]].min(axis=1), table[["origin", "destination"]].max(axis=1)
    table["pair"] = pd.factorize(low + "-" + high)[0]
    return table


def design_of(table: pd.DataFrame) -> Any:
    columns = (table["origin_size"], table["destination_size"], np.log(table["sea_distance"]), table["same"])
    return np.column_stack([np.ones(len(table)), *columns])


# --- what ships


@pytest.mark.parametrize("name", ["ports", "routes", "flows"])
def test_shipped_files_are_the_generators_output_to_the_byte(name: str, tmp_path: Path) -> None:
    write_islands(tmp_path, SHIPPED_SEED)
    file = f"islands_{name}.csv"
    assert (tmp_path / file).read_bytes() == (DEMO / file).read_bytes()
    assert sorted(path.name for path in tmp_path.iterdir()) == sorted(path.name for path in DEMO.iterdir())


def test_another_seed_makes_another_world_with_the_same_names(shipped: IslandsTables) -> None:
    other = generate_islands(SHIPPED_SEED + 1)
    assert list(other.ports["name"]) == list(shipped.ports["name"])
    assert not np.any(other.ports["throughput"] == shipped.ports["throughput"])
    assert not other.flows.equals(shipped.flows)


def test_the_label_na_is_text_everywhere(shipped: IslandsTables) -> None:
    ports, flows = read_table(DEMO / "islands_ports.csv"), read_table(DEMO / "islands_flows.csv")
    assert list(ports.loc[ports["port"] == "NA", "name"]) == ["Navira"]
    assert (flows["origin"] == "NA").sum() > 0
    assert (flows["destination"] == "NA").sum() > 0
    assert "NA" in set(shipped.ports["port"])
    # The trap is real: pandas' defaults lose the port.
    assert pd.read_csv(DEMO / "islands_ports.csv")["port"].isna().sum() == 1


def test_ports_are_sixty_with_unique_labels_and_round_numbers(shipped: IslandsTables) -> None:
    ports = shipped.ports
    assert len(ports) == 60
    assert ports["port"].is_unique
    assert ports["name"].is_unique
    assert ports["port"].is_monotonic_increasing
    assert ports["port"].str.fullmatch("[A-Z]{2}").all()
    assert ports["language"].nunique() == 5
    assert ports["archipelago"].value_counts().tolist() == [10] * 6
    for column, decimals in (("latitude", 4), ("longitude", 4), ("throughput", 1)):
        assert all(len(repr(value).split(".")[1]) <= decimals for value in ports[column])
    # Heavy tail: a lognormal with sd 1.2 has mean / median = exp(0.72) = 2.05, a normal 1.
    assert ports["throughput"].mean() > 1.5 * ports["throughput"].median()


def test_sea_distances_are_a_metric_no_shorter_than_the_great_circle(shipped: IslandsTables) -> None:
    wide = shipped.routes.pivot(index="origin", columns="destination", values="sea_distance")
    sea = np.nan_to_num(wide.to_numpy(), nan=0.0)
    assert len(shipped.routes) == 60 * 59
    np.testing.assert_array_equal(sea, sea.T)
    latitude, longitude = (shipped.ports[name].to_numpy() for name in ("latitude", "longitude"))
    circle = great_circle_km(latitude[:, None], longitude[:, None], latitude[None, :], longitude[None, :])
    off = ~np.eye(60, dtype=bool)
    assert np.all(sea[off] >= circle[off])
    assert np.all(sea[off] <= (1 + ISLANDS_TRUTH.largest_detour) * circle[off] + 0.1)
    assert np.ptp(sea[off] / circle[off]) > 0.1
    assert np.all(sea[:, :, None] <= sea[:, None, :] + sea.T[None, :, :] + 1e-9)


def test_flows_are_positive_whole_and_span_orders_of_magnitude(shipped: IslandsTables) -> None:
    flows = shipped.flows
    assert flows["tonnes"].dtype == np.int64
    assert flows["tonnes"].min() == 1
    assert 8e4 <= flows["tonnes"].max() <= 2e5
    assert not flows.duplicated(["year", "origin", "destination"]).any()
    assert not (flows["origin"] == flows["destination"]).any()
    assert set(flows["year"]) == set(YEARS)


def test_density_degrees_and_the_boundary_are_as_documented(shipped: IslandsTables) -> None:
    labels = shipped.ports["port"]
    idle = {}
    largest, smallest = [], []
    for year, flows in shipped.flows.groupby("year"):
        assert 0.25 <= len(flows) / (60 * 59) <= 0.4
        degrees = np.array(
            [flows[end].value_counts().reindex(labels, fill_value=0) for end in ("origin", "destination")]
        )
        idle[year] = int((degrees == 0).sum())
        largest.append(degrees.max())
        smallest.append(degrees[degrees > 0].min())
    assert idle[2031] >= 1
    assert idle[2029] == idle[2030] == idle[2032] == 0
    assert min(smallest) <= 2
    assert 48 <= max(largest) < 59


def test_links_are_reciprocated_more_than_their_probabilities_imply(shipped: IslandsTables) -> None:
    table = dyads_of(shipped)
    p = _link_probability(table)
    a = (table["tonnes"] > 0).to_numpy(float)
    reverse = table[["year", "origin", "destination"]].assign(a=a, p=p)
    reverse = reverse.rename(columns={"origin": "destination", "destination": "origin"})
    other = table[["year", "origin", "destination"]].merge(reverse, on=["year", "origin", "destination"])
    product = (a - p) * (other["a"].to_numpy() - other["p"].to_numpy())
    by_pair = pd.Series(product).groupby(table["pair"]).sum()
    z = by_pair.sum() / np.sqrt((by_pair**2).sum())
    assert z > 5


# --- the truth


def _link_probability(table: pd.DataFrame) -> Any:
    eta = design_of(table) @ np.array(astuple(ISLANDS_TRUTH.links))
    return 1 / (1 + np.exp(-(eta + table["origin_effect"] + table["destination_effect"]).to_numpy()))


@pytest.mark.parametrize("seed", [SHIPPED_SEED, 1001])
def test_link_coefficients_are_recovered_given_the_true_effects(seed: int) -> None:
    """Four standard errors, clustered by pair because directions and years correlate."""
    table = dyads_of(generate_islands(seed))
    offset = (table["origin_effect"] + table["destination_effect"]).to_numpy()
    links = (table["tonnes"] > 0).to_numpy(float)
    model = sm.GLM(links, design_of(table), family=sm.families.Binomial(), offset=offset)
    fit = model.fit(cov_type="cluster", cov_kwds={"groups": table["pair"].to_numpy()})
    z = (fit.params - np.array(astuple(ISLANDS_TRUTH.links))) / fit.bse
    assert np.all(np.abs(z) < 4), z
    assert np.all(fit.bse[1:] < 0.12)  # so that four standard errors tell the coefficients from zero


def test_without_the_effects_the_covariates_do_not_explain_the_degrees(shipped: IslandsTables) -> None:
    """Covariates alone leave out-degrees far more spread than independent links would."""
    table = dyads_of(shipped)
    table = table[table["year"] == 2031]
    links = (table["tonnes"] > 0).to_numpy(float)
    p = sm.GLM(links, design_of(table), family=sm.families.Binomial()).fit().fittedvalues
    by_origin = pd.DataFrame({"gap": links - p, "variance": p * (1 - p)}).groupby(table["origin"].to_numpy())
    sums = by_origin.sum()
    # Under the covariates alone this mean is about 1 with standard error sqrt(2 / 60) = 0.18.
    assert (sums["gap"] ** 2 / sums["variance"]).mean() > 2


@pytest.mark.parametrize("seed", [SHIPPED_SEED, 1001])
def test_weight_coefficients_and_dispersion_are_recovered(seed: int) -> None:
    table = dyads_of(generate_islands(seed))
    table = table[table["tonnes"] > 0]
    design, truth, alpha = (
        design_of(table),
        np.array(astuple(ISLANDS_TRUTH.weights)),
        ISLANDS_TRUTH.dispersion,
    )
    excess, pair = table["tonnes"].to_numpy() - 1, table["pair"].to_numpy()
    model = sm.GLM(excess, design, family=sm.families.NegativeBinomial(alpha=alpha))
    fit = model.fit(cov_type="cluster", cov_kwds={"groups": pair})
    z = (fit.params - truth) / fit.bse
    assert np.all(np.abs(z) < 4), z
    assert np.all(fit.bse[1:] < 0.09)
    # E[((y - mu)^2 - mu) / mu^2] = alpha, whatever mu.
    mu = np.exp(design @ truth)
    gap = ((excess - mu) ** 2 - mu) / mu**2 - alpha
    se = np.sqrt((pd.Series(gap).groupby(pair).sum() ** 2).sum()) / len(gap)
    assert abs(gap.mean()) < 4 * se
    assert se < 0.15  # 1.3 is then far from a Poisson's 0


def test_weights_follow_the_stated_law_over_its_whole_range(shipped: IslandsTables) -> None:
    """Mid-ranks of the distribution function are uniform: mean 1/2, variance 1/12, in every mean class."""
    table = dyads_of(shipped)
    table = table[table["tonnes"] > 0]
    mu = np.exp(design_of(table) @ np.array(astuple(ISLANDS_TRUTH.weights)))
    alpha, excess = ISLANDS_TRUTH.dispersion, table["tonnes"].to_numpy() - 1
    law = nbinom(1 / alpha, 1 / (1 + alpha * mu))
    rank = law.cdf(excess) - law.pmf(excess) / 2
    for part in np.array_split(np.argsort(mu), 4):
        sums = pd.Series(rank[part] - 0.5).groupby(table["pair"].to_numpy()[part]).sum()
        assert abs(sums.sum()) < 4 * np.sqrt((sums**2).sum())
        assert rank[part].var() == pytest.approx(1 / 12, rel=0.15)


def test_a_poisson_is_clearly_overdispersed(shipped: IslandsTables) -> None:
    table = dyads_of(shipped)
    table = table[table["year"] == 2031]
    poisson = sm.GLM(table["tonnes"].to_numpy(), design_of(table), family=sm.families.Poisson()).fit()
    assert poisson.pearson_chi2 / poisson.df_resid > 100  # 1 under the Poisson law


# --- the open tables


def test_digests_in_the_readme_are_those_of_the_files() -> None:
    block = (OPEN / "README.md").read_text(encoding="utf-8").split("```")[1].strip()
    stated = {name: digest for digest, name in (line.split() for line in block.splitlines())}
    found = {path.name: sha256(path.read_bytes()).hexdigest() for path in OPEN.glob("*.csv")}
    assert stated == found
    assert len(found) == 4


def test_open_airports_are_as_the_readme_says() -> None:
    routes, airports = read_table(OPEN / "air_routes_2008.csv"), read_table(OPEN / "airports.csv")
    count = routes["count"].astype(int)
    assert (len(routes), len(airports), count.sum()) == (5366, 305, 7_009_728)
    assert (count.min(), count.max()) == (1, 13_788)
    assert sorted(airports.loc[airports["state"] == "NA", "iata"]) == ["CLD", "HHH", "MQT", "SCE"]
    names = set(airports["iata"])
    assert names - set(routes["origin"]) == {"CYS", "OGD"}
    assert names - set(routes["destination"]) == {"PUB"}
    links = set(zip(routes["origin"], routes["destination"], strict=True))
    assert len(links) == 5366
    assert not any(origin == destination for origin, destination in links)
    mutual = sum((destination, origin) in links for origin, destination in links)
    assert round(100 * mutual / 5366, 2) == 94.37
    assert round(5366 / (305 * 304), 4) == 0.0579


def test_open_states_follow_the_recipe_from_the_airports() -> None:
    table, states = read_table(OPEN / "state_air_flows_2008.csv"), read_table(OPEN / "states.csv")
    flow = table["flow"].astype(int)
    assert (len(table), len(states), flow.sum()) == (2352, 49, 6_022_039)
    assert (flow[flow > 0].min(), flow.max()) == (1, 68_990)
    assert "NA" not in set(states["state"])
    assert round((flow > 0).mean(), 4) == 0.5514
    routes, airports = read_table(OPEN / "air_routes_2008.csv"), read_table(OPEN / "airports.csv")
    state = airports.set_index("iata")["state"]
    routes = routes.assign(
        o=state.loc[routes["origin"]].to_numpy(),
        d=state.loc[routes["destination"]].to_numpy(),
        n=routes["count"].astype(int),
    )
    rebuilt = routes.groupby(["o", "d"])["n"].sum()
    keys = pd.MultiIndex.from_arrays([table["origin"], table["destination"]])
    assert rebuilt.reindex(keys, fill_value=0).tolist() == flow.tolist()
    traffic = pd.concat([routes.groupby(end)["n"].sum() for end in ("origin", "destination")])
    weight = airports["iata"].map(traffic.groupby(level=0).sum())
    place = states.set_index("state")[["latitude", "longitude"]].astype(float)
    for column in place:
        mean = (airports[column].astype(float) * weight).groupby(airports["state"]).sum()
        mean /= weight.groupby(airports["state"]).sum()
        np.testing.assert_allclose(place[column], mean.loc[place.index], rtol=1e-12)
    o, d = (place.loc[table[end]].to_numpy() for end in ("origin", "destination"))
    distance = great_circle_km(o[:, 0], o[:, 1], d[:, 0], d[:, 1])
    np.testing.assert_allclose(table["distance"].astype(float), distance, rtol=1e-12)
