"""What a report says besides its tables: the data, the methods, the provenance."""

from __future__ import annotations

import platform
from collections.abc import Iterator
from importlib.metadata import version

import numpy as np

from steelyard.benchmark.footing import Footing, Scope
from steelyard.benchmark.study import Study
from steelyard.datasets import Dyads, FlowNetwork
from steelyard.models import Measure, Model, ModelClass
from steelyard.reports import FootingSheet, MethodSheet, ReportFacts

__all__ = ["data_facts", "footing_sheets", "method_sheet", "report_facts", "software_versions"]

LIBRARIES = ("steelyard", "numpy", "scipy", "pandas", "statsmodels", "joblib", "matplotlib")


def report_facts(study: Study) -> ReportFacts:
    """Everything that two runs of one study have in common; times are left to provenance.json."""
    return ReportFacts(
        title=study.title,
        data=data_facts(study.network),
        methods=tuple(_methods(study)),
        provenance=(*_provenance(study), *software_versions().items()),
        notes=_notes(),
        footings=footing_sheets(study.dyads),
    )


def footing_sheets(dyads: Dyads) -> tuple[FootingSheet, ...]:
    """Every footing on these dyads, in the order a reader wants them: whole flows, parts, expected flows."""
    whole = "For the whole law of the flows: where links are, and how heavy they are."
    given = "For the weights alone, where the links are known."
    sheets = (
        (Measure.COUNTS, Scope.WHOLE, "Whole flows (links and weights), as counts", whole),
        (Measure.AMOUNTS, Scope.WHOLE, "Whole flows (links and weights), as amounts", whole),
        (Measure.LINKS, Scope.WHOLE, "Which links exist", "For the links alone, whatever they carry."),
        (Measure.COUNTS, Scope.GIVEN_LINKS, "How heavy a given link is, as counts", given),
        (Measure.AMOUNTS, Scope.GIVEN_LINKS, "How heavy a given link is, as amounts", given),
        (None, Scope.WHOLE, "Expected flow on each dyad", "For one predicted flow a dyad, without its law."),
    )
    return tuple(
        FootingSheet(Footing.of(dyads, measure, scope).text, title, purpose)
        for measure, scope, title, purpose in sheets
    )


def data_facts(network: FlowNetwork) -> tuple[tuple[str, str], ...]:
    """The network at a glance, as (label, value) pairs."""
    dyads, links = network.n_dyads, network.n_links
    amount = network.provenance.amount
    facts = [
        ("places", f"{network.n_nodes:,}"),
        ("dyads", f"{dyads:,} {'ordered' if network.directed else 'unordered'} pairs"),
        ("links", f"{links:,} ({100 * links / dyads:.1f} % of dyads; {dyads - links:,} zeros)"),
        ("total flow", _amount(network.total) + ("" if amount == "not stated" else f" {amount}")),
    ]
    if network.directed and links:
        facts.append(("reciprocated links", f"{100 * _reciprocity(network):.1f} %"))
    if links:
        positive = network.flows.data
        facts.append(("flow on a link", f"{_amount(positive.min())} to {_amount(positive.max())}"))
    if network.unit != 1.0:
        below = int((network.flows.data < network.unit / 2).sum())
        facts.append(("unit", f"{network.unit:g}; {below:,} links below half a unit are counted as 1"))
    facts.append(("nodes at the boundary", _boundary(network)))
    return tuple(facts)


def _amount(value: float) -> str:
    """Whole amounts with thousands separators, others with six digits."""
    return f"{value:,.0f}" if float(value).is_integer() and abs(value) < 1e15 else f"{value:,.6g}"


def _reciprocity(network: FlowNetwork) -> float:
    links = network.flows.astype(bool).astype(np.int64)
    return float(links.multiply(links.T).sum() / links.sum())


def _boundary(network: FlowNetwork) -> str:
    """Nodes with no links at all, or with all of them, in some role."""
    links = network.flows.astype(bool).astype(np.int64)
    out, into = np.asarray(links.sum(axis=1)), np.asarray(links.sum(axis=0))
    roles = (("out", out), ("in", into)) if network.directed else (("", out + into),)
    found = []
    for role, degree in roles:
        for word, level in (("no", 0), ("all", network.n_nodes - 1)):
            for node in np.flatnonzero(degree == level):
                found.append(f"{network.labels[node]} ({word} {role}{'-' if role else ''}links)")
    shown = ", ".join(found[:6]) + (f" and {len(found) - 6} more" if len(found) > 6 else "")
    return shown or "none"


def method_sheet(model: Model | ModelClass) -> MethodSheet:
    """One model's sheet, the same in a report and in `steelyard models NAME`."""
    return MethodSheet(
        name=model.name,
        family=model.family.value,
        summary=model.summary,
        formula=model.formula,
        parameters=model.parameters,
        sources=model.sources,
        caution=model.caution,
    )


def _methods(study: Study) -> Iterator[MethodSheet]:
    """A sheet for each model that some candidate uses, once."""
    seen: dict[str, Model] = {}
    for candidate in study.candidates:
        for part in candidate.parts:
            seen.setdefault(part.name, part)
    return (method_sheet(seen[name]) for name in sorted(seen))


def _provenance(study: Study) -> Iterator[tuple[str, str]]:
    found = study.network.provenance
    yield "source", found.source
    yield "licence", found.licence
    yield "steps", "; ".join(found.steps) or "none"
    yield "data digest", study.network.digest
    yield "seed", str(study.seed)
    for scheme in study.validation:
        yield (
            f"validation {scheme.name}",
            f"{scheme.folds} folds, {scheme.repeats} repeats, pairs kept together",
        )


def software_versions() -> dict[str, str]:
    """Name -> version of everything that numbers depend on."""
    return {"python": platform.python_version(), **{name: version(name) for name in LIBRARIES}}


def _notes() -> tuple[str, ...]:
    return (
        "Standard errors: 'model' is the inverse observed information, joint over all parameters of a "
        "likelihood, dispersion included; 'robust' is HC1, with the factor n / (n - k); 'node_clustered' "
        "allows dependence between all dyads that share a node and carries no small-sample factor.",
        "A law of amounts stands on the counts footing through cells: the probability that its amount is "
        "recorded as that count, links below one unit kept at 1. Its parameters were fitted to the amounts, so "
        "its count log-likelihood there is a little below the best it could reach.",
        "Information criteria count identified parameters and use all dyads of the footing as n. They are "
        "given for whole laws and one-part models, whose likelihood is at its maximum; the parts of a joint law "
        "are compared out of sample.",
    )
