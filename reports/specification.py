"""Tests of specification side by side: tests in rows and candidates in columns, then pairs of candidates."""

import math
from collections.abc import Iterable, Sequence

from steelyard.reports.cells import format_cell
from steelyard.reports.frames import CandidateRow, SpecificationRow
from steelyard.reports.tables import Cell, CellKind, Column, Table
from steelyard.reports.wording import count, label_list

__all__ = ["specification_tables"]

_TITLES = {
    "likelihood_ratio": "likelihood ratio",
    "overdispersion": "overdispersion",
    "park": "Park",
    "reset": "RESET",
    "rival_zeros": "rival means",
    "vuong": "Vuong",
}
_OF_PAIRS = ("likelihood_ratio", "vuong", "rival_zeros")
_VERSIONS = ("raw", "AIC-corrected", "BIC-corrected")
_KINDS = ("independent dyads", "robust", "node-clustered")
_NOT_COMPUTED = "not computed: "


def specification_tables(
    candidates: Sequence[CandidateRow], tests: Sequence[SpecificationRow]
) -> tuple[Table, ...]:
    """Tests of one candidate side by side, then likelihoods of two, then means of two; empty ones left out."""
    names = [row.candidate for row in candidates]
    names += [name for name in dict.fromkeys(row.candidate for row in tests) if name not in names]
    found = (
        _single(names, [row for row in tests if row.test not in _OF_PAIRS]),
        _nested([row for row in tests if row.test == "likelihood_ratio"]),
        _vuong([row for row in tests if row.test == "vuong"]),
        _rivals(names, [row for row in tests if row.test == "rival_zeros"]),
    )
    return tuple(table for table in found if table is not None)


def _single(names: Sequence[str], rows: Sequence[SpecificationRow]) -> Table | None:
    shown = [name for name in names if any(row.candidate == name for row in rows)]
    if not shown:
        return None
    by_key = {(row.test, row.against, row.candidate): row for row in rows if _is_computed(row)}
    keys = list(dict.fromkeys((row.test, row.against) for row in rows if _is_computed(row)))
    order = list(dict.fromkeys(row.test for row in rows))
    keys.sort(key=lambda key: order.index(key[0]))
    cells = [
        (
            f"{_TITLES.get(test, test)}: {_split(against)[0]}",
            _split(against)[1] or None,
            *(_cell(by_key.get((test, against, name))) for name in shown),
        )
        for test, against in keys
    ]
    columns = (
        Column("test", "Test, against", CellKind.TEXT),
        Column("error", "Error", CellKind.TEXT),
        *(Column(f"candidate-{n}", name, CellKind.TEXT) for n, name in enumerate(shown, 1)),
    )
    notes = (
        "Statistic, with its p-value in parentheses. Overdispersion is one-sided; RESET and Park rows are "
        "two-sided against the standard normal, except RESET by F.",
        "An en dash: the test does not concern that candidate, or could not be computed.",
        *_reasons(rows),
        "A small p-value speaks against one assumption on these dyads; it chooses no model. Where dyads that "
        "share a node are associated, only node-clustered rows allow for it; with few nodes (30, say) their "
        "p-values come out small too often.",
    )
    return Table("tests-of-one", "Tests of each candidate's specification", columns, tuple(cells), notes)


def _nested(rows: Sequence[SpecificationRow]) -> Table | None:
    if not rows:
        return None
    columns = (
        Column("candidate", "Candidate", CellKind.TEXT),
        Column("against", "Other; which lies in which", CellKind.TEXT),
        Column("statistic", "Likelihood ratio", CellKind.SIGNIFICANT, 4),
        Column("p_value", "p", CellKind.P_VALUE, 3),
        Column("reference", "Reference", CellKind.TEXT),
    )
    cells: list[tuple[Cell, ...]] = [
        (row.candidate, row.against, row.statistic, row.p_value, _plain(row.note)) for row in rows
    ]
    notes = (
        "Twice the gain in log-likelihood from the smaller law to the larger one. Its reference law holds where "
        "dyads are independent and the larger law is right.",
    )
    return Table("tests-nested", "Laws of which one contains the other", columns, tuple(cells), notes)


def _vuong(rows: Sequence[SpecificationRow]) -> Table | None:
    if not rows:
        return None
    heads = [(version, kind) for kind in (_KINDS[0], _KINDS[2]) for version in _VERSIONS]
    columns = (
        Column("candidate", "Candidate", CellKind.TEXT),
        Column("other", "Other", CellKind.TEXT),
        *(
            Column(f"version-{n}", f"{version}, {kind}", CellKind.TEXT)
            for n, (version, kind) in enumerate(heads, 1)
        ),
    )
    by_pair: dict[tuple[str, str], dict[tuple[str, str], SpecificationRow]] = {}
    for row in rows:
        other, version, kind = _version(row.against)
        if version:
            by_pair.setdefault((row.candidate, other), {})[version, kind] = row
    cells = tuple(
        (*pair, *(_cell(found.get(head)) for head in heads))
        for pair, found in by_pair.items()
        if any(_is_computed(row) for row in found.values())
    )
    notes = (
        "Statistic, with its two-sided p-value in parentheses; positive values favour the candidate, negative ones "
        "the other.",
        "For laws of which none contains the other. It is no test for zero inflation (Wilson 2015): read observed "
        "and expected zeros for that. An en dash under node-clustered: that variance is not positive.",
        *_reasons(rows),
    )
    return Table(
        "tests-vuong", "Vuong's test of laws of which none contains the other", columns, cells, notes
    )


def _rivals(names: Sequence[str], rows: Sequence[SpecificationRow]) -> Table | None:
    """Node-clustered statistics as a square: whose mean is held right, and whose would explain its errors."""
    if not rows:
        return None
    found = {(row.candidate, *_split(row.against)): row for row in rows}
    shown = [name for name in names if any(name == row.candidate for row in rows)]
    rivals = [name for name in names if any((c, name, _KINDS[2]) in found for c in shown)]
    columns = (
        Column("candidate", "Mean held right", CellKind.TEXT),
        *(Column(f"rival-{n}", f"Rival: {name}", CellKind.TEXT) for n, name in enumerate(rivals, 1)),
    )
    cells = tuple(
        (name, *(_cell(found.get((name, rival, _KINDS[2]))) for rival in rivals))
        for name in shown
        if any(_is_computed(row) for row in rows if row.candidate == name)
    )
    notes = (
        "t of what a rival's mean adds to the candidate's, with its two-sided p-value; node-clustered errors, "
        "robust ones stand in tables/tests.csv. Rows and columns may both have small p-values, or neither.",
        "Formula from memory, after Santos Silva, Tenreyro & Windmeijer (2015).",
        *_reasons(rows),
    )
    return Table("tests-rivals", "Rival means of flows with many zeros", columns, cells, notes)


def _is_computed(row: SpecificationRow) -> bool:
    return not math.isnan(row.statistic)


def _cell(row: SpecificationRow | None) -> Cell:
    """ "2.41 (0.016)"; nothing where there is no statistic."""
    if row is None or not _is_computed(row):
        return None
    statistic = format_cell(row.statistic, CellKind.SIGNIFICANT, 3)
    return f"{statistic} ({format_cell(row.p_value, CellKind.P_VALUE, 3)})"


def _split(against: str) -> tuple[str, str]:
    """What it is against, and the kind of error that stands last."""
    head, _, kind = against.rpartition("; ")
    return (head, kind) if kind in _KINDS else (against, "")


def _version(against: str) -> tuple[str, str, str]:
    """The other candidate, the version and the kind of error; only the other where nothing was computed."""
    rest, kind = _split(against)
    other, _, version = rest.rpartition("; ")
    return (other, version, kind) if version in _VERSIONS else (against, "", "")


def _plain(note: str) -> str:
    text = note.removeprefix(_NOT_COMPUTED).removeprefix("reference ")
    return text if text == note.removeprefix("reference ") else f"not computed: {text}"


def _reasons(rows: Sequence[SpecificationRow]) -> Iterable[str]:
    """One sentence for each reason why something was not computed, with those it concerns."""
    groups: dict[tuple[str, str], list[str]] = {}
    for row in rows:
        if not _is_computed(row) and row.note:
            key = (row.test, row.note.removeprefix(_NOT_COMPUTED).partition("; ")[0])
            groups.setdefault(key, []).append(row.candidate)
    for (test, reason), concerned in groups.items():
        names = list(dict.fromkeys(concerned))
        number = count(len(concerned), "row")
        title = _TITLES.get(test, test)
        yield f"{title[:1].upper()}{title[1:]} not computed ({number}; {label_list(names, 6)}): {reason}."
