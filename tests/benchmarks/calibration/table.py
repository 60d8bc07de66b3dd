"""The table in words: a line a row and generator, then the calibration tables."""

from collections.abc import Iterable, Iterator, Sequence

import numpy as np

from tests.benchmarks.calibration.figures import (
    Level,
    Tenth,
    calibration_error,
    levels,
    membership_pairs,
    summarise,
    tenths,
)
from tests.benchmarks.calibration.outcome import Done, Job, Outcome
from tests.benchmarks.calibration.rows import (
    CHAIN_TOGETHER,
    NULLS_TOGETHER,
    ROWS,
    Bound,
    Row,
)

COLUMNS = (
    *("ari", "spread", "edge_filter", "gain", "recall", "power", "n_false"),
    *("any_unit", "false_shown", "internal", "lattice", "brier", "ece", "change"),
)
HEADS = (
    *("ARI", "±", "edge", "gain", "recall", "power", "false"),
    *("any", "shown!", "internl", "lattice", "brier", "ece", "change"),
)
LEGEND = """\
ARI: adjusted Rand index, ± its standard error; edge: that of the plain edge filter;
gain: their difference; recall: true units matched; power: matched and called supported
or beyond-gradient; false: false units a problem; any: problems with a unit;
shown!: problems in which a false unit is called so; internl, lattice: matched units
with such a lattice verdict; brier, ece: of the membership of sites in matched units;
change: of ARI from the row above on the same seeds."""
WIDTH = 41
NEEDS_TESTS = ("power", "false_shown", "brier", "ece")


def lines_of(
    done: Sequence[Done], generators: Sequence[str], rows: Sequence[Row] = ROWS
) -> tuple[list[str], bool]:
    """Return the whole table and whether everything that must be reached is."""
    by_job = {one.job: one for one in done}
    heads = " ".join(f"{head:>7}" for head in HEADS)
    out = [LEGEND, "", f"{'':{WIDTH}} {'n':>4} {heads} {'s each':>7}"]
    kept = True
    for row in rows:
        for generator in generators:
            some = of_row(by_job.values(), row.name, generator)
            if any(one.outcome for one in some):
                line, good = row_line(row, generator, some, by_job)
                out.append(line)
                kept &= good
    for generator in generators:
        chosen = [one for one in done if one.job.generator == generator]
        more, good = together_lines(chosen, rows)
        if more:
            out += ["", f"{generator} generator, rows together", *more]
        kept &= good
    return out, kept


def of_row(done: Iterable[Done], row: str, generator: str) -> list[Done]:
    """Return what is done of a row."""
    return [one for one in done if (one.job.row, one.job.generator) == (row, generator)]


def outcomes_of(done: Iterable[Done]) -> list[Outcome]:
    """Return the outcomes; structures without room have none."""
    return [one.outcome for one in done if one.outcome is not None]


def row_line(
    row: Row, generator: str, done: Sequence[Done], by_job: dict[Job, Done]
) -> tuple[str, bool]:
    """Return one line of the table and whether its bounds are kept."""
    outcomes = outcomes_of(done)
    figures = summarise(outcomes) | {"change": change_of(row, done, by_job)}
    if row.against:
        figures |= dict.fromkeys(NEEDS_TESTS, float("nan"))
    cells = " ".join(cell(figures[name]) for name in COLUMNS)
    seconds = sum(one.seconds for one in done) / len(done)
    name = f"{row.name} ({generator})" if generator == "own" else f"  {generator}"
    said, good = judge(row.bounds, figures)
    text = f"{name:{WIDTH}} {len(outcomes):4} {cells} {seconds:7.1f}  {said}"
    return text.rstrip(), good


def cell(value: float) -> str:
    """Return a figure in three places; blank where there is none."""
    return f"{'' if np.isnan(value) else f'{value:.3f}':>7}"


def change_of(row: Row, done: Sequence[Done], by_job: dict[Job, Done]) -> float:
    """Return the mean change of the index on the same seeds, NaN without a partner."""
    if not row.against:
        return float("nan")
    changes = []
    for one in done:
        job = one.job
        other = by_job.get(
            Job(
                generator=job.generator,
                row=row.against,
                file=job.file,
                seed=job.seed,
            )
        )
        if one.outcome and other and other.outcome:
            changes.append(one.outcome.rand_index - other.outcome.rand_index)
    return float(np.mean(changes)) if changes else float("nan")


def judge(bounds: Sequence[Bound], figures: dict[str, float]) -> tuple[str, bool]:
    """Return which bounds are missed, and whether all that are no aims are kept."""
    reached = {
        name: abs(value) if name == "change" else value
        for name, value in figures.items()
    }
    unknown = [one for one in bounds if np.isnan(reached[one.figure])]
    missed = [
        one
        for one in bounds
        if one not in unknown and not one.is_kept(reached[one.figure])
    ]
    must = [str(one) for one in missed if not one.aim]
    aims = [str(one) for one in missed if one.aim]
    said = [f"MISSED {', '.join(must)}"] if must else []
    said += [f"short of {', '.join(aims)}"] if aims else []
    said += [f"{one.figure} not known" for one in unknown if not one.aim]
    return "; ".join(said), not must and all(one.aim for one in unknown)


def together_lines(done: Sequence[Done], rows: Sequence[Row]) -> tuple[list[str], bool]:
    """Return what is asked of several rows together."""
    plans = {row.name: row for row in rows if not row.against}
    some = [one for one in done if one.job.row in plans]
    nulls = outcomes_of(one for one in some if plans[one.job.row].plan.kind == "null")
    units = [
        one
        for one in some
        if plans[one.job.row].plan.kind == "units"
        and plans[one.job.row].plan.effect >= 5
    ]
    fifth = outcomes_of(one for one in units if plans[one.job.row].plan.effect == 5)
    out: list[str] = []
    verdicts = []
    if nulls:
        share = float(np.mean([one.any_unit for one in nulls]))
        verdicts.append(say(f"{len(nulls)} nulls", NULLS_TOGETHER, share))
    if units:
        share = summarise(outcomes_of(units))["internal"]
        verdicts.append(say("chain units, E 5 and 8", CHAIN_TOGETHER, share))
    out += [text for text, _ in verdicts]
    good = all(kept for _, kept in verdicts)
    if fifth:
        out += ["", *membership_lines(fifth)]
    for row in (row for row in plans.values() if row.plan.kind == "null"):
        found = outcomes_of(one for one in some if one.job.row == row.name)
        if found:
            lines, kept = chance_lines(row.name, found)
            out += lines
            good &= kept
    return out, good


def say(what: str, bound: Bound, value: float) -> tuple[str, bool]:
    """Return one bound over several rows, and whether it is kept."""
    kept = bound.is_kept(value)
    return f"{what}: {bound.figure} {value:.3f}{'' if kept else f'  MISSED {bound}'}", (
        kept
    )


def membership_lines(outcomes: Sequence[Outcome]) -> list[str]:
    """Return how many sites belong of those that are said to, by tenths."""
    pairs = membership_pairs(outcomes)
    return [
        "membership at E 5: probability said, share true, sites "
        f"(expected calibration error {calibration_error(pairs):.3f})",
        *(tenth_line(one) for one in tenths(pairs)),
    ]


def tenth_line(one: Tenth) -> str:
    """Return one tenth."""
    off = "  off by more than two standard errors" if one.is_off else ""
    return (
        f"  {one.low:.1f} to {one.low + 0.1:.1f}   {one.said:.3f}   {one.true:.3f} "
        f"± {one.error:.3f} {one.n:6}{off}"
    )


def chance_lines(name: str, outcomes: Sequence[Outcome]) -> tuple[list[str], bool]:
    """Return how often p values of problems without units lie at or below levels."""
    found = {
        "p_any": levels([one.p_any for one in outcomes]),
        "smallest p_place": levels([one.p_place for one in outcomes]),
    }
    lines = [
        f"{name}, {len(outcomes)} sets: {kind} {', '.join(map(level_text, these))}"
        for kind, these in found.items()
    ]
    good = all(one.is_kept for these in found.values() for one in these)
    return ["", *lines] if lines else [], good


def level_text(one: Level) -> str:
    """Return one level."""
    text = f"≤ {one.level:g} in {one.found} (at most {one.most})"
    return text if one.is_kept else f"{text} MISSED"


def print_lines(lines: Iterable[str]) -> None:
    """Print lines."""
    for line in lines:
        print(line)


def missing_of(jobs: Iterable[Job], done: Iterable[Done]) -> Iterator[Job]:
    """Yield the jobs that are not done."""
    known = {one.job for one in done}
    return (job for job in jobs if job not in known)
