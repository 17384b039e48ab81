"""The stress table:  python tests/stress/table.py [--cases 200] [--jobs 2]

Every econometric model on every simulated network of `cases.py`, each certified fit checked by an independent
optimiser on an independent likelihood. Prints how many fits ended how, and every one that was silently wrong.
"""

from __future__ import annotations

import argparse
from collections import Counter
from collections.abc import Sequence

from cases import COLUMNS, N_CASES, Case, cases
from joblib import Parallel, delayed
from trial import Ending, Trial, tried

from steelyard.models import Family, Model, Need, model_registry

STEPS = {20: 300, 30: 300, 45: 150, 70: 80, 200: 12}


def stressed_models() -> dict[str, Model]:
    """Every registered econometric model that states a law, with all covariates; both forms where there are two."""
    found: dict[str, Model] = {}
    for name, kind in model_registry().load_all()[0].items():
        if kind.family is not Family.ECONOMETRIC or kind.requires.covariates is Need.NONE:
            continue
        options: dict[str, tuple[str, ...]] = {"covariates": COLUMNS}
        if "inflation" in kind.__dataclass_fields__:
            options["inflation"] = COLUMNS
        found[name] = kind(**options)
        if "form" in kind.__dataclass_fields__:
            found[f"{name} form 1"] = kind(covariates=COLUMNS, form=1)
    return found


def trials(case: Case) -> list[tuple[str, Case, Trial]]:
    """All models on one network."""
    dyads = case.dyads()
    steps = STEPS[case.n_nodes]
    return [(key, case, tried(model, key, dyads, steps=steps)) for key, model in stressed_models().items()]


def main() -> int:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--cases", type=int, default=N_CASES)
    parser.add_argument("--jobs", type=int, default=2)
    options = parser.parse_args()
    chosen = list(cases())[: options.cases]
    many = Parallel(n_jobs=options.jobs, verbose=1)(delayed(trials)(case) for case in chosen)
    found = [one for some in many for one in some]
    print(as_text(found))
    return 1 if any(trial.ending is Ending.WRONG for _, _, trial in found) else 0


def as_text(found: Sequence[tuple[str, Case, Trial]]) -> str:
    """The table by model and by defect, the reasons of refusals, and every silently wrong fit."""
    lines = [f"{'':44}{'fits':>6}{'certified':>11}{'of these at a limit':>21}{'refused':>9}{'wrong':>7}"]
    for title, key in (("model", 0), ("defect", 1)):
        lines.append(title)
        groups = dict.fromkeys(_group(one, key) for one in found)
        lines += [_line(group, [o[2] for o in found if _group(o, key) == group]) for group in groups]
    lines.append(_line("all", [trial for _, _, trial in found]))
    reasons = Counter(_kind_of(t.reason) for _, _, t in found if t.ending is Ending.REFUSED)
    lines += [
        "",
        "reasons of refusals",
        *(f"  {count:5d}  {reason}" for reason, count in reasons.most_common()),
    ]
    wrong = [(k, c, t) for k, c, t in found if t.ending is Ending.WRONG]
    lines += ["", f"silently wrong: {len(wrong)}", *(f"  {k} on {c.label}: {t.reason}" for k, c, t in wrong)]
    return "\n".join(lines)


def _group(one: tuple[str, Case, Trial], key: int) -> str:
    return one[0] if key == 0 else one[1].defect.value


def _line(label: str, trials: Sequence[Trial]) -> str:
    ended = Counter(t.ending for t in trials)
    limits = sum(t.separated for t in trials)
    return (
        f"  {label[:42]:42}{len(trials):6d}{ended[Ending.CERTIFIED]:11d}{limits:21d}"
        f"{ended[Ending.REFUSED]:9d}{ended[Ending.WRONG]:7d}"
    )


def _kind_of(reason: str) -> str:
    """A reason without its numbers."""
    return "".join("#" if c.isdigit() else c for c in reason)


if __name__ == "__main__":
    raise SystemExit(main())
