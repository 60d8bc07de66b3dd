"""From tables to verdicts: groups, units of x, errors, points left out."""

import pickle
from dataclasses import replace

import numpy as np
import pytest

from structmap.errors import (
    MissingConditionError,
    UnknownProcessModelError,
    UnknownUnitError,
    UnusableProfileError,
)
from structmap.one_process import (
    ONE_PROCESS_COLUMNS,
    Conditions,
    TestOptions,
    analyse_table,
    groups_by_row,
    make_model,
    prepare_profiles,
    spinning_conditions,
    table_rows,
)
from structmap.one_process.reference import adjust_by_holm
from structmap.one_process.tabular import compare_choices
from structmap.values import Quantity, ValueTable, read_values
from tests.one_process.demo import FIELDS, make_blocks

FAST = TestOptions(n_replicates=199, n_border=199, n_reference=199)
SPINNING = spinning_conditions(
    mas_rate_hertz=60e3, proton_frequency_megahertz=600.0, sample="deuterated"
)


def quantity(value, error, x, *, unit="s-1", x_unit="kHz", name="R1rho"):
    value = np.asarray(value, dtype=float)
    return Quantity(
        name=name,
        unit=unit,
        x=x,
        x_name="field" if len(x) else "",
        x_unit=x_unit,
        value=value,
        error=np.broadcast_to(error, value.shape),
        has_errors=bool(np.isfinite(error).any()),
    )


def table(*quantities, group=None):
    n_rows = len(quantities[0].value)
    return ValueTable(
        names=("rates.csv",),
        sha256=("0" * 64,),
        auth_asym_id=["A"] * n_rows,
        auth_seq_id=np.arange(n_rows) + 10,
        ins_code=[""] * n_rows,
        comp_id=[""] * n_rows,
        atom=[""] * n_rows,
        group=group if group is not None else [""] * n_rows,
        line=np.arange(n_rows) + 2,
        quantities=quantities,
        notes=(),
    )


def spinning_table(*, group=False, extra_fields=(), error=None):
    blocks = make_blocks()
    value = np.concatenate([blocks["Q"].value, blocks["X"].value])
    sigma = np.concatenate([blocks["Q"].error, blocks["X"].error])
    if error is not None:
        sigma = np.full_like(sigma, error)
    for _ in extra_fields:
        value = np.column_stack([value, np.full(15, 100.0)])
        sigma = np.column_stack([sigma, np.full(15, 1.0)])
    x = np.concatenate([FIELDS / 1e3, extra_fields])
    names = ["loop"] * 8 + ["patch"] * 7 if group else None
    return table(quantity(value, sigma, x), group=names)


def test_groups_of_a_column_get_a_verdict_each():
    results = analyse_table(
        spinning_table(group=True),
        "mas-r1rho",
        rng=np.random.default_rng(1),
        conditions=SPINNING,
        options=FAST,
    )
    assert [r.group for r in results] == ["loop", "patch"]
    assert [r.verdict for r in results] == ["shared", "distinct"]
    assert results[0].reference_p != results[0].reference_p  # 7 others are too few
    assert results[1].p_adjusted == pytest.approx(2 * results[1].p_distinct)


def test_rows_carry_the_agreed_columns():
    results = analyse_table(
        spinning_table(group=True),
        "mas-r1rho",
        rng=np.random.default_rng(1),
        conditions=SPINNING,
        options=FAST,
    )
    rows = table_rows(results)
    assert tuple(rows[0]) == ONE_PROCESS_COLUMNS
    assert rows[0]["n_sites"] == "8"
    assert float(rows[0]["value"]) == pytest.approx(1.846e-5, rel=1e-3)
    assert (rows[0]["parameter"], rows[0]["unit"]) == ("tau", "s")


def test_without_a_column_all_sites_are_one_group():
    results = analyse_table(
        spinning_table(),
        "mas-r1rho",
        rng=np.random.default_rng(1),
        conditions=SPINNING,
        options=FAST,
    )
    assert [(r.group, len(r.sites)) for r in results] == [("all", 15)]


def test_a_group_does_not_change_with_the_others_around_it():
    def run(names):
        whole = spinning_table()
        labelled = table(*whole.quantities, group=names)
        return analyse_table(
            labelled,
            "mas-r1rho",
            rng=np.random.default_rng(3),
            conditions=SPINNING,
            options=FAST,
        )[0]

    first = run(["loop"] * 8 + ["patch"] * 7)
    again = run(["loop"] * 8 + [""] * 7)
    assert first.p_parametric == again.p_parametric


def test_rows_of_the_table_become_groups_of_profiles():
    whole = spinning_table()
    value = whole.quantities[0].value.copy()
    value[2] = np.nan  # a site without any value has no profile
    part = quantity(value, whole.quantities[0].error, FIELDS / 1e3)
    prepared = prepare_profiles(table(part), "mas-r1rho", conditions=SPINNING)
    groups = groups_by_row(
        prepared, {"U1": np.array([1, 2, 3, 3]), "U2": np.array([2])}
    )
    assert list(groups) == ["U1"]
    assert [prepared.profiles.name[i] for i in groups["U1"]] == ["A/11", "A/13"]


def test_a_written_table_goes_all_the_way(tmp_path):
    lines = ["residue,group,x [kHz],value=R1rho [s-1],error"]
    block = make_blocks()["Q"]
    for site in range(8):
        for point, field in enumerate(FIELDS):
            value, error = block.value[site, point], block.error[site, point]
            lines.append(f"{site + 3},loop,{field / 1e3},{value:.6f},{error:.6f}")
    path = tmp_path / "rates.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    (found,) = analyse_table(
        read_values(path),
        "mas-r1rho",
        rng=np.random.default_rng(1),
        conditions=SPINNING,
        options=FAST,
    )
    assert (found.group, found.verdict) == ("loop", "shared")
    assert found.value == pytest.approx(1.846e-5, rel=1e-3)


def test_coherent_points_are_left_out_and_named():
    prepared = prepare_profiles(
        spinning_table(extra_fields=(59.0,)), "mas-r1rho", conditions=SPINNING
    )
    assert len(prepared.profiles.x) == 12
    assert prepared.left_out == ("59 kHz: within 3 kHz of the spinning rate",)


def test_points_of_caution_are_marked():
    prepared = prepare_profiles(
        spinning_table(extra_fields=(54.0,)), "mas-r1rho", conditions=SPINNING
    )
    assert prepared.caution.tolist() == [False] * 12 + [True]


def test_missing_errors_are_estimated_from_the_scatter():
    rng = np.random.default_rng(2)
    time = np.arange(1.0, 11.0)
    true = 2 * np.exp(-0.4 * time) * np.ones((20, 1))
    measured = quantity(
        true + 0.05 * rng.standard_normal(true.shape), np.nan, time, x_unit="s"
    )
    prepared = prepare_profiles(table(measured), "exponential", conditions=Conditions())
    assert prepared.profiles.error[0, 0] == pytest.approx(0.05, rel=0.15)
    assert prepared.notes[0].startswith("No errors are given; the scatter")


def test_a_single_missing_error_takes_the_common_one():
    whole = spinning_table(error=0.2)
    error = whole.quantities[0].error.copy()
    error[3, 4] = np.nan
    part = quantity(whole.quantities[0].value, error, FIELDS / 1e3)
    prepared = prepare_profiles(table(part), "mas-r1rho", conditions=SPINNING)
    assert prepared.profiles.error[3, 4] == pytest.approx(0.2)


def test_x_is_converted():
    time = quantity(np.ones((2, 6)), 0.1, np.arange(6.0), x_unit="ms")
    prepared = prepare_profiles(table(time), "exponential", conditions=Conditions())
    np.testing.assert_allclose(prepared.profiles.x, 1e-3 * np.arange(6))


def test_rates_of_two_fields_make_a_tumbling_profile():
    def column(name, values):
        return quantity(
            np.array(values)[:, None], 0.05, np.empty(0), x_unit="", name=name
        )

    read = table(
        column("R1_600", [1.3, 1.3, 1.2]),
        column("R2_600", [14.0, 14.1, 6.0]),
        column("NOE_600", [0.8, 0.8, 0.2]),
        column("R1_800", [0.9, 0.9, 0.9]),
        column("R2_800", [18.0, 18.1, 7.0]),
    )
    prepared = prepare_profiles(read, "model-free", conditions=Conditions())
    assert prepared.profiles.value.shape == (2, 4)
    assert "1 sites with a NOE below 0.65" in prepared.notes[0]


@pytest.mark.parametrize(
    ("spoil", "error", "message"),
    [
        (
            lambda: (spinning_table(), "mas-r1rho", Conditions()),
            MissingConditionError,
            r"^model mas-r1rho: the rate of magic-angle spinning is missing; "
            r"set mas_rate_hertz",
        ),
        (
            lambda: (spinning_table(), "spin-lock", SPINNING),
            UnknownProcessModelError,
            r"^model 'spin-lock' is not known; take one of mas-r1rho, ",
        ),
        (
            lambda: (
                table(quantity(np.ones((2, 6)), 0.1, np.arange(6.0), x_unit="")),
                "exponential",
                SPINNING,
            ),
            UnknownUnitError,
            r"^rates.csv, field of R1rho: no unit is given where one like s is",
        ),
        (
            lambda: (
                table(quantity(np.ones((2, 6)), 0.1, np.arange(6.0) - 1, x_unit="s")),
                "exponential",
                SPINNING,
            ),
            UnusableProfileError,
            r"^rates.csv, field of R1rho: -1 s is below 0; correct or remove",
        ),
        (
            lambda: (
                table(quantity(np.ones((2, 6)), 0.1, [1, 1, 2, 3, 4, 5], x_unit="s")),
                "exponential",
                SPINNING,
            ),
            UnusableProfileError,
            r"^rates.csv, field of R1rho: 1 s stands twice; average",
        ),
        (
            lambda: (
                table(quantity(np.ones((2, 3)), 0.1, np.arange(3.0), x_unit="s")),
                "exponential",
                SPINNING,
            ),
            UnusableProfileError,
            r"^rates.csv, field of R1rho: 3 points for 3 parameters a site; "
            r"exponential needs at least 5 points",
        ),
        (
            lambda: (
                table(quantity(np.ones((2, 1)), 0.1, np.empty(0), x_unit="")),
                "exponential",
                SPINNING,
            ),
            UnusableProfileError,
            r"^rates.csv: there is no profile; give one row a point",
        ),
    ],
)
def test_faults_name_place_and_remedy(spoil, error, message):
    spoiled, name, conditions = spoil()
    with pytest.raises(error, match=message) as caught:
        prepare_profiles(spoiled, name, conditions=conditions)
    assert str(pickle.loads(pickle.dumps(caught.value))) == str(caught.value)


def test_coupling_between_protons_is_tried_both_ways():
    proton = Conditions(experiment=replace(SPINNING.experiment, nucleus="1H"))
    results = analyse_table(
        spinning_table(group=True),
        "mas-r1rho",
        rng=np.random.default_rng(1),
        conditions=proton,
        options=FAST,
    )
    for result in results:
        told = [note for note in result.notes if "coupling between protons" in note]
        assert len(told) in (0, 1)
    alone = replace(results[0], verdict="shared")
    other = replace(results[0], verdict="distinct")
    said = compare_choices(alone, other, with_pairs=True).notes[-1]
    assert said.endswith("shared with it, distinct without.")


def test_share_of_the_shift_anisotropy_is_told():
    prepared = prepare_profiles(spinning_table(), "mas-r1rho", conditions=SPINNING)
    assert prepared.notes[-1].startswith("Shift anisotropy gives 27 % of the rate")


def test_every_model_of_the_catalogue_can_be_made():
    for name in ("exchange-r1rho", "cpmg", "exponential", "binding", "melting"):
        assert make_model(name, Conditions()).name == name
    assert make_model("mas-r1rho", SPINNING).name == "mas-r1rho"


def test_holm_adjusts_as_published():
    # Worked by hand: 0.01 x 4, 0.02 x 3, max(0.06, 0.03 x 2), max(0.06, 0.04).
    adjusted = adjust_by_holm([0.03, 0.01, float("nan"), 0.04, 0.02])
    assert adjusted[:2] + adjusted[3:] == pytest.approx([0.06, 0.04, 0.06, 0.06])
    assert np.isnan(adjusted[2])
