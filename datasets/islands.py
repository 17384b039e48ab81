"""Freight between invented island ports, made by a seeded generator whose truth is known.

Every place, name and language here is invented. Four years of directed freight between 60 ports of six
archipelagos follow, for each ordered pair (i, j) of ports and year t,

    links    P(w_ijt > 0) = 1 / (1 + exp(-eta_ijt)),   eta_ijt = x_ij' a + o_it + d_jt
    weights  w_ijt - 1 given a link ~ negative binomial with mean exp(x_ij' b) and
             variance mean + dispersion * mean^2
    x_ij     = (1, log throughput_i, log throughput_j, log sea_distance_ij, [language_i = language_j])

The node effects o and d are normal, last from year to year as an autoregression of order one, and are in no
table that ships, so degrees differ by more than the covariates explain. Given the effects, links are not
independent: the normal scores behind the two directions of a pair correlate, so links are reciprocated more
than their probabilities imply, and each score lasts from year to year. The same holds for the weights. Every
single link and weight still follows exactly the law above (a Gaussian copula [1]_ leaves margins alone). No
model of Steelyard is exactly this one; which of them comes near, and on what, is for the comparison to find.
All numbers of the truth stand in `ISLANDS_TRUTH`.

Throughput is lognormal; ports lie around the middle of their archipelago; a port speaks the main language
of its archipelago or, less often, another. Sea distance is the shortest way over any ports as stops, where a
leg is the great circle times a detour factor >= 1 that is the same both ways; so it is symmetric, obeys the
triangle inequality, and is nowhere below the great circle.

The shipped files are rewritten by

    python -c "from pathlib import Path; from steelyard.datasets import islands; \
               islands.write_islands(Path('datasets/demo_data'), islands.SHIPPED_SEED)"

and should come out byte for byte the same on any machine: draws are raw PCG64 bits, whose stream NumPy keeps
fixed, turned into numbers by inverse distribution functions (never by NumPy's samplers, which may change);
coordinates are rounded to 4 decimals, throughputs and distances to 1, before anything is derived from them,
and flows are whole. What a last bit of a library function could still move is a draw within about 1e-15 of a
rounding edge. `SHIPPED_SEED` is the first seed, counted from 1, with a port that has no departures or no
arrivals in 2031 and in no other year, a port with at least 48 of either but none with all 59, a density from
0.25 to 0.4 in every year, and a largest flow from 80,000 to 200,000 tonnes.

References
----------
.. [1] Nelsen (2006), An Introduction to Copulas, 2nd edition, Springer.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pandas as pd
from scipy import special

from steelyard.datasets.arrays import Bools, Floats, Integers
from steelyard.datasets.geography import great_circle_km

__all__ = [
    "ISLANDS_TRUTH",
    "SHIPPED_SEED",
    "GravityCoefficients",
    "IslandsTables",
    "IslandsTruth",
    "generate_islands",
    "write_islands",
]

SHIPPED_SEED = 48

# Names are built from a few syllables for each archipelago. None is in the GeoNames list of places of 500 or
# more inhabitants (with alternate spellings, accents dropped), nor in ISO 3166 or ISO 639-3.
# The code NA is there on purpose: a reader must never take it for a missing value.
# Columns: archipelago, main language, latitude and longitude of its middle, codes and names of its ports.
_ARCHIPELAGOS = (
    ("Velunara", "Velunic", -4.0, -128.0,
     "NA Navira LU Lunevel LV Luvimo MI Milumo NL Nalurmo OS Osona ON Onevel RA Raluna SE Sesovel VE Vevimo"),
    ("Kestroma", "Kestric", 7.0, -119.0,
     "BA Bartrisk BR Bardask DU Dunboro DN Duntrima GO Golbosk GL Goltriro KE Kestriden KS Keskiden "
     "TR Trokima VK Vekdama"),
    ("Ilaheunoa", "Ilaheu", -15.0, -121.0,
     "FA Farulo FM Familo HO Hoanoata HA Hoaleke IL Ilamita PE Pemilo QU Quamiheu QA Quaruta TI Tiruke "
     "TM Timiheu"),
    ("Skerrowan", "Skerran", -9.0, -109.0,
     "BE Braelalow BW Braewiset FI Findemar FN Finrowick SK Skerdewick TH Thorlaset TO Thordemar UL Ulwiset "
     "WA Wandelow WN Wanlalow"),
    ("Drisventa", "Drisven", 3.0, -104.0,
     "AM Amledor AS Amsvenzo CA Casleta CS Cassvendor DR Drirador DI Dritizo EL Elticia PO Porsventa "
     "PR Porledor ZU Zulezo"),
    ("Yushoren", "Velunic", -21.0, -107.0,
     "HM Hamayan HS Hashuto JO Jomain JS Joshuin NG Ngokiyan NO Ngoreba RU Rukito RM Rumaba XE Xemain "
     "YU Yushuyan"),
)  # fmt: skip
_YEARS = (2029, 2030, 2031, 2032)
_LARGEST_COUNT = 2**40


@dataclass(frozen=True)
class GravityCoefficients:
    """Coefficients of one linear predictor, in the order of x_ij in the module's docstring."""

    constant: float
    origin_throughput: float
    destination_throughput: float
    sea_distance: float
    same_language: float


@dataclass(frozen=True)
class IslandsTruth:
    """Everything that governs the draws, apart from the seed.

    Attributes
    ----------
    links, weights : coefficients a (log odds) and b (log tonnes)
    origin_effect_sd, destination_effect_sd : standard deviations of o and d, in log odds
    effect_persistence : correlation of a port's effect with that of the year before
    dispersion : of the weights' negative binomial; 1 would be the geometric law
    pair_correlation : of the normal scores of i -> j and j -> i
    draw_persistence : correlation of a normal score with that of the year before
    log_throughput_mean, log_throughput_sd : of throughput in thousand tonnes
    archipelago_radius : degrees from the middle to the outermost ports
    minority_share : probability that a port's language is drawn from all languages
    largest_detour : largest detour factor of a leg, less 1
    """

    links: GravityCoefficients
    weights: GravityCoefficients
    origin_effect_sd: float
    destination_effect_sd: float
    effect_persistence: float
    dispersion: float
    pair_correlation: float
    draw_persistence: float
    log_throughput_mean: float
    log_throughput_sd: float
    archipelago_radius: float
    minority_share: float
    largest_detour: float


ISLANDS_TRUTH = IslandsTruth(
    links=GravityCoefficients(-1.0, 0.6, 0.5, -0.9, 0.7),
    weights=GravityCoefficients(4.2, 0.8, 0.7, -1.1, 0.4),
    origin_effect_sd=1.0,
    destination_effect_sd=0.7,
    effect_persistence=0.9,
    dispersion=1.3,
    pair_correlation=0.4,
    draw_persistence=0.7,
    log_throughput_mean=6.0,
    log_throughput_sd=1.2,
    archipelago_radius=4.0,
    minority_share=0.3,
    largest_detour=0.4,
)


@dataclass(frozen=True)
class IslandsTables:
    """The tables of one seed, sorted by their keys; pandas data frames.

    Attributes
    ----------
    ports : port, name, latitude, longitude (degrees), throughput (thousand tonnes a year), language,
        archipelago
    routes : origin, destination, sea_distance (km); all ordered pairs
    flows : year, origin, destination, tonnes; pairs without freight are left out
    effects : year, port, origin_effect, destination_effect (log odds); hidden truth, in no file that ships
    """

    ports: Any
    routes: Any
    flows: Any
    effects: Any


def generate_islands(seed: int) -> IslandsTables:
    """Draw the islands of a seed by the law in the module's docstring.

    Parameters
    ----------
    seed : whole number >= 0; ports, routes, effects and flows all depend on it, names do not

    Raises
    ------
    ValueError : the seed is negative (from NumPy)
    """
    bits = np.random.PCG64(seed)
    ports = _draw_ports(bits)
    distance = _draw_sea_distances(bits, ports)
    origin_effects = _draw_effects(bits, ISLANDS_TRUTH.origin_effect_sd, len(ports))
    destination_effects = _draw_effects(bits, ISLANDS_TRUTH.destination_effect_sd, len(ports))
    effects = origin_effects[:, :, None] + destination_effects[:, None, :]
    link_levels, weight_levels = _draw_levels(bits, len(ports)), _draw_levels(bits, len(ports))
    linked = link_levels < special.expit(_predictor(ISLANDS_TRUTH.links, ports, distance) + effects)
    linked &= ~np.eye(len(ports), dtype=bool)
    mean = np.broadcast_to(np.exp(_predictor(ISLANDS_TRUTH.weights, ports, distance)), linked.shape)
    tonnes = 1 + _negative_binomial_quantile(weight_levels[linked], mean[linked], ISLANDS_TRUTH.dispersion)
    return IslandsTables(
        ports=ports,
        routes=_routes_table(ports, distance),
        flows=_flows_table(ports, linked, tonnes),
        effects=pd.DataFrame(
            {
                "year": np.repeat(_YEARS, len(ports)),
                "port": np.tile(ports["port"].to_numpy(), len(_YEARS)),
                "origin_effect": origin_effects.ravel(),
                "destination_effect": destination_effects.ravel(),
            }
        ),
    )


def write_islands(directory: Path, seed: int) -> None:
    """Write islands_ports.csv, islands_routes.csv and islands_flows.csv of a seed, over what is there."""
    tables = generate_islands(seed)
    for name, table in (("ports", tables.ports), ("routes", tables.routes), ("flows", tables.flows)):
        path = directory / f"islands_{name}.csv"
        unfinished = path.with_suffix(".unfinished")
        unfinished.write_bytes(table.to_csv(index=False, lineterminator="\n").encode("utf-8"))
        unfinished.replace(path)


def _uniforms(bits: np.random.PCG64, shape: tuple[int, ...]) -> Floats:
    """Draws strictly between 0 and 1: the middles of 2^52 equal intervals, so that no inverse is infinite."""
    raw = np.asarray(bits.random_raw(int(np.prod(shape))), dtype=np.uint64)
    levels: Floats = ((raw >> np.uint64(12)).astype(np.float64) + 0.5) * 2.0**-52
    return levels.reshape(shape)


def _normals(bits: np.random.PCG64, shape: tuple[int, ...]) -> Floats:
    """Standard normal draws."""
    scores: Floats = special.ndtri(_uniforms(bits, shape))
    return scores


def _draw_ports(bits: np.random.PCG64) -> Any:
    """One row a port, sorted by code; places, languages and throughputs drawn, names and groups fixed."""
    truth = ISLANDS_TRUTH
    languages = sorted({language for _, language, *_ in _ARCHIPELAGOS})
    rows = []
    for archipelago, main_language, latitude, longitude, ports in _ARCHIPELAGOS:
        words = ports.split()
        n = len(words) // 2
        # A sunflower: equal shares of the disc, each turned by the golden angle, then shaken a little.
        radius = truth.archipelago_radius * np.sqrt((np.arange(n) + 0.5) / n)
        angle = 2 * np.pi * (_uniforms(bits, (1,)) + np.arange(n) * (3 - np.sqrt(5)) / 2)
        shake = 0.3 * _normals(bits, (2, n))
        mixed = _uniforms(bits, (n,)) < truth.minority_share
        other = (_uniforms(bits, (n,)) * len(languages)).astype(np.int64)
        size = np.exp(truth.log_throughput_mean + truth.log_throughput_sd * _normals(bits, (n,)))
        frame = pd.DataFrame({"port": words[::2], "name": words[1::2]})
        frame["latitude"] = np.round(latitude + radius * np.sin(angle) + shake[0], 4)
        frame["longitude"] = np.round(longitude + radius * np.cos(angle) + shake[1], 4)
        frame["throughput"] = np.round(size, 1)
        frame["language"] = [languages[o] if m else main_language for m, o in zip(mixed, other, strict=True)]
        frame["archipelago"] = archipelago
        rows.append(frame)
    return pd.concat(rows).sort_values("port", ignore_index=True)


def _draw_sea_distances(bits: np.random.PCG64, ports: Any) -> Floats:
    """Shortest ways in km, (n, n), symmetric; worked out in whole tenths, so that equal ways are equal."""
    latitude, longitude = ports["latitude"].to_numpy(), ports["longitude"].to_numpy()
    legs = great_circle_km(latitude[:, None], longitude[:, None], latitude[None, :], longitude[None, :])
    # Squared, so that most legs are nearly straight and a few go a long way round.
    detour = np.triu(1 + ISLANDS_TRUTH.largest_detour * _uniforms(bits, legs.shape) ** 2, 1)
    tenths = np.ceil(np.triu(legs, 1) * detour * 10)
    tenths += tenths.T
    for stop in range(len(ports)):
        tenths = np.minimum(tenths, tenths[:, stop, None] + tenths[None, stop, :])
    return tenths / 10


def _draw_effects(bits: np.random.PCG64, sd: float, n_ports: int) -> Floats:
    """Node effects, (n_years, n_ports): a stationary autoregression with standard deviation `sd`."""
    return sd * _persistent(_normals(bits, (len(_YEARS), n_ports)), ISLANDS_TRUTH.effect_persistence)


def _draw_levels(bits: np.random.PCG64, n_ports: int) -> Floats:
    """Uniform levels, (n_years, n, n), correlated between the directions of a pair and from year to year."""
    shape = (len(_YEARS), n_ports, n_ports)
    shared = np.triu(_normals(bits, shape), 1)
    shared += np.swapaxes(shared, 1, 2)
    own = _normals(bits, shape)
    correlation = ISLANDS_TRUTH.pair_correlation
    scores = np.sqrt(correlation) * shared + np.sqrt(1 - correlation) * own
    levels: Floats = special.ndtr(_persistent(scores, ISLANDS_TRUTH.draw_persistence))
    return levels


def _persistent(innovations: Floats, correlation: float) -> Floats:
    """Standard normal innovations turned into a stationary autoregression along the first axis."""
    values = innovations.copy()
    for t in range(1, len(values)):
        values[t] = correlation * values[t - 1] + np.sqrt(1 - correlation**2) * innovations[t]
    return values


def _predictor(coefficients: GravityCoefficients, ports: Any, distance: Floats) -> Floats:
    """x_ij' coefficients, (n, n); the diagonal means nothing."""
    size = np.log(ports["throughput"].to_numpy())
    language = ports["language"].to_numpy(dtype=object)
    same = (language[:, None] == language[None, :]).astype(np.float64)
    value: Floats = (
        coefficients.constant
        + coefficients.origin_throughput * size[:, None]
        + coefficients.destination_throughput * size[None, :]
        + coefficients.sea_distance * np.log(distance + np.eye(len(ports)))
        + coefficients.same_language * same
    )
    return value


def _negative_binomial_quantile(level: Floats, mean: Floats, dispersion: float) -> Integers:
    """Smallest count whose distribution function reaches `level`, by bisection.

    With size r = 1 / dispersion and p = r / (r + mean) the function is the regularised incomplete beta
    I_p(r, count + 1). Library quantiles differ between versions where rounding decides; this does not.
    """
    size = 1 / dispersion
    below, above = np.full(level.shape, -1, np.int64), np.full(level.shape, _LARGEST_COUNT, np.int64)
    while np.any(above - below > 1):
        middle = (below + above) // 2
        reached = special.betainc(size, middle + 1.0, size / (size + mean)) >= level
        above, below = np.where(reached, middle, above), np.where(reached, below, middle)
    return above


def _routes_table(ports: Any, distance: Floats) -> Any:
    """All ordered pairs with their sea distance."""
    code = ports["port"].to_numpy()
    origin, destination = np.nonzero(~np.eye(len(code), dtype=bool))
    return pd.DataFrame(
        {
            "origin": code[origin],
            "destination": code[destination],
            "sea_distance": distance[origin, destination],
        }
    )


def _flows_table(ports: Any, linked: Bools, tonnes: Integers) -> Any:
    """Links of all years; `tonnes` in the order of `linked`."""
    code = ports["port"].to_numpy()
    year, origin, destination = np.nonzero(linked)
    return pd.DataFrame(
        {
            "year": np.asarray(_YEARS)[year],
            "origin": code[origin],
            "destination": code[destination],
            "tonnes": tonnes,
        }
    )
