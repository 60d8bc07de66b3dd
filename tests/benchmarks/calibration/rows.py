"""The rows of the table: what is planted, how it is analysed, what must be reached."""

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Literal

from tests.planted_problems import Plan

DATA = Path(__file__).parent.parent.parent / "data"
FILES = ("1orc.pdb", "4cup.cif.gz", "1gbt.cif.gz", "4zhl.cif.gz")
CA_FILES = ("1lzh.pdb.gz",)
CUTOFF_ANGSTROM, CA_CUTOFF_ANGSTROM = 4.5, 7.5


@dataclass(frozen=True, slots=True, kw_only=True)
class Bound:
    """What a figure must reach; an aim is printed, but fails nothing."""

    figure: str
    value: float
    side: Literal["least", "most"] = "least"
    aim: bool = False

    def is_kept(self, reached: float) -> bool:
        """Tell whether a figure keeps the bound; one that is not known does not."""
        if self.side == "least":
            return reached >= self.value
        return reached <= self.value

    def __str__(self) -> str:
        sign = "≥" if self.side == "least" else "≤"
        return f"{'aim ' if self.aim else ''}{self.figure} {sign} {self.value:g}"


def least(value: float, *figures: str, aim: bool = False) -> tuple[Bound, ...]:
    """Return lower bounds of one value."""
    return tuple(Bound(figure=one, value=value, aim=aim) for one in figures)


def most(value: float, *figures: str, aim: bool = False) -> tuple[Bound, ...]:
    """Return upper bounds of one value."""
    return tuple(
        Bound(figure=one, value=value, side="most", aim=aim) for one in figures
    )


@dataclass(frozen=True, slots=True, kw_only=True)
class Row:
    """One set of problems.

    `against` names the row on the same seeds that the change of the index is taken
    from; such rows are analysed without the tests of chance, which change no unit.
    """

    name: str
    plan: Plan
    bounds: tuple[Bound, ...]
    files: tuple[str, ...] = FILES
    cutoff_angstrom: float = CUTOFF_ANGSTROM
    against: str = ""

    @property
    def asks_for_accidents(self) -> bool:
        """Whether something shown is an error here, so that many sets are needed."""
        return self.plan.kind in ("null", "scatter")

    def seeds(self, first: int, *, planted: int, nulls: int) -> range:
        """Return the seeds of this row for each structure."""
        count = nulls if self.asks_for_accidents else planted
        if self.files == CA_FILES:
            count *= 2
        return range(first, first + count)


def name_of(plan: Plan) -> str:
    """Return what a row holds, in a few words."""
    rest = "field" if plan.field else "quiet"
    return f"{plan.kind:7} K {plan.n_points:2} E {plan.effect:g} {rest}"


# Key: points, effect, field. What the method must reach: 48 problems of another
# generator gave more, mostly by three standard errors; aims were not reached there.
PLANTED: dict[tuple[int, int, bool], tuple[Bound, ...]] = {
    (10, 3, False): least(0.90, "ari"),
    (10, 3, True): least(0.75, "ari"),
    (10, 5, False): (
        *least(0.90, "ari", "recall"),
        *least(0.75, "power"),
        *least(0.80, "power", aim=True),
        *least(0.05, "gain"),
    ),
    (10, 5, True): (
        *least(0.90, "ari", "recall"),
        *least(0.38, "power"),
        *least(0.80, "power", aim=True),
        *least(0.15, "gain"),
    ),
    (10, 8, False): (
        *least(0.92, "ari"),
        *least(0.75, "power"),
        *least(0.90, "power", aim=True),
    ),
    (10, 8, True): (
        *least(0.92, "ari"),
        *least(0.38, "power"),
        *least(0.90, "power", aim=True),
    ),
    (1, 3, False): least(0.55, "ari"),
    (1, 3, True): least(0.50, "ari", aim=True),
    (1, 5, False): (
        *least(0.85, "ari"),
        *least(0.65, "power"),
        *least(0.05, "gain"),
    ),
    (1, 5, True): (
        *least(0.70, "ari"),
        *least(0.33, "power"),
        *least(0.15, "gain"),
    ),
    (1, 8, False): (*least(0.92, "ari"), *least(0.85, "power")),
    (1, 8, True): (*least(0.90, "ari"), *least(0.65, "power")),
}


def planted_rows() -> list[Row]:
    """Return units inside the molecule, at three sizes, with and without a field."""
    out = []
    for (points, effect, field), bounds in PLANTED.items():
        plan = Plan(n_points=points, effect=float(effect), field=field)
        calibrated = effect == 5
        out.append(
            Row(
                name=name_of(plan),
                plan=plan,
                bounds=(
                    *bounds,
                    *most(0.06, "false_shown"),
                    *(most(0.10, "brier") if calibrated else ()),
                    *(most(0.05, "ece") if calibrated else ()),
                ),
            )
        )
    return out


def accident_rows() -> list[Row]:
    """Return problems without units, and with movers strewn at random."""
    nulls = [
        Plan(n_points=points, effect=5.0, field=field, kind="null")
        for points in (10, 1)
        for field in (False, True)
    ]
    scattered = [
        Plan(n_points=points, effect=5.0, field=False, kind="scatter")
        for points in (10, 1)
    ]
    return [
        *(
            Row(
                name=name_of(plan),
                plan=plan,
                bounds=(*most(0.08, "any_unit"), *most(0.03, "false_shown")),
            )
            for plan in nulls
        ),
        *(
            Row(
                name=name_of(plan),
                plan=plan,
                bounds=(
                    *most(0.10, "false_shown"),
                    *most(0.05, "false_shown", aim=True),
                ),
            )
            for plan in scattered
        ),
    ]


def lattice_rows() -> list[Row]:
    """Return units that only lattice contacts join."""
    plans = [
        Plan(n_points=points, effect=5.0, field=False, kind="lattice")
        for points in (10, 1)
    ]
    return [
        Row(
            name=name_of(plan),
            plan=plan,
            bounds=least(0.90 if plan.n_points > 1 else 0.85, "lattice"),
        )
        for plan in plans
    ]


def varied_rows() -> list[Row]:
    """Return errors stated wrongly and other cutoffs, on the same seeds."""
    out = []
    for points in (10, 1):
        for field in (False, True):
            plan = Plan(n_points=points, effect=5.0, field=field)
            name = name_of(plan)
            out += [
                Row(
                    name=f"{name} errors x {factor:g}",
                    plan=replace(plan, misreport=factor),
                    bounds=most(0.005, "change"),
                    against=name,
                )
                for factor in (0.5, 2.0)
            ]
            out += [
                Row(
                    name=f"{name} cutoff {cutoff:g}",
                    plan=plan,
                    bounds=(
                        *most(0.11 if cutoff < 4.5 else 0.07, "change"),
                        *most(0.06, "change", aim=True),
                    ),
                    cutoff_angstrom=cutoff,
                    against=name,
                )
                for cutoff in (4.0, 5.0, 6.0)
            ]
    return out


def ca_rows() -> list[Row]:
    """Return a crystal of which only the CA atoms are known."""
    plans = [Plan(n_points=points, effect=5.0, field=False) for points in (10, 1)]
    return [
        Row(
            name=f"{name_of(plan)} CA only",
            plan=plan,
            bounds=least(0.88, "ari"),
            files=CA_FILES,
            cutoff_angstrom=CA_CUTOFF_ANGSTROM,
        )
        for plan in plans
    ]


ROWS: tuple[Row, ...] = (
    *planted_rows(),
    *accident_rows(),
    *lattice_rows(),
    *varied_rows(),
    *ca_rows(),
)
NULLS_TOGETHER = most(0.04, "any_unit")[0]
CHAIN_TOGETHER = least(0.97, "internal")[0]
