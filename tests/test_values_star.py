"""Reading NMR-STAR and NEF files."""

import math
import sys

import numpy as np
import pytest

from structmap.errors import FileProblemError, MissingExtraError
from structmap.sites import match_sites
from structmap.structure import read_structure
from structmap.values import read_values
from structmap.values.errors import RepeatedRowError, UnreadableCellError


def relaxation(*rows, unit="ms", frequency="600", frame="T1_set"):
    """Return a T1 list as deposited: Seq_ID, Comp_ID, Atom_ID, Val, Val_err, entity."""
    lines = "\n".join(" ".join(str(cell) for cell in row) for row in rows)
    return f"""
save_{frame}
  _Heteronucl_T1_list.Sf_category heteronucl_T1_relaxation
  _Heteronucl_T1_list.Spectrometer_frequency_1H {frequency}
  _Heteronucl_T1_list.T1_val_units {unit}
  loop_
    _T1.Seq_ID
    _T1.Comp_ID
    _T1.Atom_ID
    _T1.Val
    _T1.Val_err
    _T1.Entity_ID
{lines}
  stop_
save_
"""


@pytest.fixture
def star(tmp_path):
    """Return a function that writes an NMR-STAR file and reads it."""

    def write_and_read(*frames):
        path = tmp_path / "entry.str"
        path.write_text("data_entry\n" + "\n".join(frames))
        return read_values(path)

    return write_and_read


ROWS = ((4, "LYS", "N", 800, 8, 1), (5, "GLY", "N", 500, ".", 1))


@pytest.mark.parametrize(
    ("unit", "seconds", "time"),
    [("ms", 1e-3, True), ("s", 1.0, True), ("s-1", 1.0, False), ("ms-1", 1e-3, False)],
)
def test_times_and_rates_become_rates_in_hertz(star, unit, seconds, time):
    values = star(relaxation(*ROWS, unit=unit))
    quantity = values.quantities[0]
    rate = 1 / (800 * seconds) if time else 800 / seconds
    assert (quantity.name, quantity.unit) == ("R1_600MHz", "s-1")
    assert quantity.value[0, 0] == pytest.approx(rate, rel=1e-12)
    assert quantity.error[0, 0] == pytest.approx(rate / 100, rel=1e-12)  # 8 of 800
    assert math.isnan(quantity.error[1, 0])
    assert values.comp_id.tolist() == ["LYS", "GLY"]
    assert values.atom.tolist() == ["", ""]


def test_fields_are_kept_apart_by_frequency(star):
    values = star(
        relaxation(*ROWS, frequency="500.13", frame="a"),
        relaxation(*ROWS, frequency="800", frame="b"),
    )
    assert [q.name for q in values.quantities] == ["R1_500MHz", "R1_800MHz"]


def test_lists_of_one_field_are_numbered(star):
    values = star(relaxation(*ROWS, frame="a"), relaxation(*ROWS, frame="b"))
    assert [q.name for q in values.quantities] == ["R1_600MHz_1", "R1_600MHz_2"]


def spin_lock(field, *, frequency="600", rate=5.0, name=None):
    """Return a T1rho list of two residues in the tags of the dictionary."""
    return f"""
save_{name or f"T1rho_{field}"}
  _Heteronucl_T1rho_list.Sf_category heteronucl_T1rho_relaxation
  _Heteronucl_T1rho_list.Spectrometer_frequency_1H {frequency}
  _Heteronucl_T1rho_list.T1rho_val_units s-1
  loop_
    _T1rho.Seq_ID
    _T1rho.Comp_ID
    _T1rho.Atom_ID
    _T1rho.T1rho_val
    _T1rho.T1rho_val_err
4 LYS N {rate} 0.1
5 GLY N {rate + 1} 0.1
  stop_
save_
"""


def test_lists_named_by_their_spin_lock_are_points_of_a_profile(star):
    lists = [
        spin_lock(f"{field}kHz", rate=rate)
        for field, rate in ((20, 5.0), (5, 7.0), (12.5, 6.0))
    ]
    values = star(*lists)
    (profile,) = values.quantities
    assert profile.name == "R1rho_600MHz"
    assert profile.proton_frequency_megahertz == 600
    np.testing.assert_array_equal(profile.x, [5, 12.5, 20])
    assert profile.x_unit == "kHz"
    np.testing.assert_array_equal(profile.value, [[7, 6, 5], [8, 7, 6]])
    assert "T1rho_20kHz, T1rho_5kHz, T1rho_12.5kHz were recognised by" in " ".join(
        values.notes
    )


def test_spin_lock_lists_of_two_spectrometers_are_two_profiles_of_one_base(star):
    lists = [
        spin_lock(f"{field}kHz", frequency=mega, name=f"T1rho_{mega}_{field}kHz")
        for field in (5, 10, 20)
        for mega in ("600", "850")
    ]
    values = star(*lists)
    assert [(q.name, q.base) for q in values.quantities] == [
        ("R1rho_600MHz", "R1rho"),
        ("R1rho_850MHz", "R1rho"),
    ]


@pytest.mark.parametrize(
    "names", [("a_1", "a_2", "a_3"), ("a_5kHz", "b_9kHz", "a_7kHz")]
)
def test_lists_whose_names_leave_the_field_open_are_kept_apart_and_it_is_said(
    star, names
):
    values = star(*(spin_lock("", name=name) for name in names))
    assert [len(q.x) for q in values.quantities] == [0, 0, 0]
    assert "name their save frames by the field, such as R1rho_20kHz" in " ".join(
        values.notes
    )


def test_side_chain_atoms_are_sites_of_their_own(star):
    values = star(relaxation(*ROWS, (4, "LYS", "NZ", 900, 9, 1)))
    assert values.atom.tolist() == ["", "NZ", ""]


def test_unassigned_rows_are_left_out_and_said(star):
    values = star(relaxation(*ROWS, (".", "GLY", "N", 1, 1, 1)))
    assert len(values.auth_seq_id) == 2
    assert any("1 rows are not assigned to a residue" in n for n in values.notes)


@pytest.mark.parametrize(
    ("frames", "error", "message"),
    [
        (
            (relaxation(*ROWS, unit="."),),
            FileProblemError,
            "has no unit in T1_val_units",
        ),
        (
            (relaxation(*ROWS, unit="h"),),
            FileProblemError,
            "the unit 'h' in T1_val_units",
        ),
        (
            (relaxation(*ROWS, (6, "ALA", "N", 1, 1, 2)),),
            FileProblemError,
            r"list T1_set holds several molecules \(entities 1, 2\)",
        ),
        (
            (relaxation(*ROWS, (4, "LYS", "N", 1, 1, 1)),),
            RepeatedRowError,
            "rows 1 and 3: both give site 4 of T1_set",
        ),
        (
            (relaxation((4, "LYS", "N", "abc", 1, 1)),),
            UnreadableCellError,
            "row 1: T1_set Val is 'abc'",
        ),
        (
            (relaxation((4, "LYS", "N", 1, -1, 1)),),
            UnreadableCellError,
            "an error cannot be negative",
        ),
        (
            (relaxation((4, "LYS", "N", 0, 1, 1)),),
            UnreadableCellError,
            "a time or rate is above 0",
        ),
        ((relaxation(*ROWS)[:-30],), FileProblemError, "broken or truncated NMR-STAR"),
        (
            (relaxation(*ROWS, (6, "ALA")),),
            FileProblemError,
            r"NMR-STAR file \(line \d+: The loop being parsed, '_T1' does not have the "
            r"expected number of data elements\); mend it there",
        ),
        (
            (relaxation(*ROWS),) * 2,
            FileProblemError,
            r"has two save frames called T1_set \(lines 3 and 20\); give each its own",
        ),
        (
            ("save_a\n _A.Sf_category b\nsave_\n",),
            FileProblemError,
            "holds no relaxation",
        ),
    ],
)
def test_bad_star_files_are_refused_in_one_line(star, frames, error, message):
    with pytest.raises(error, match=message) as caught:
        star(*frames)
    assert "\n" not in str(caught.value)
    assert "entry.str" in str(caught.value)


def test_missing_package_is_named(star, monkeypatch):
    monkeypatch.setitem(sys.modules, "pynmrstar", None)
    with pytest.raises(MissingExtraError, match=r"pynmrstar.*\[nmrstar\]"):
        star(relaxation(*ROWS))


# --- real entries ---------------------------------------------------------------------


def test_deposited_style_relaxation_equals_the_rates_of_the_table(data_folder):
    """The star file holds the times, the table the rates of the same measurements."""
    folder = data_folder / "public/t4_lysozyme"
    star_values = read_values(folder / "t4l_relaxation.str")
    columns = ("residue", "R1", "R1_err", "R2", "R2_err", "NOE", "NOE_err")
    by_name = {q.name: q for q in star_values.quantities}
    for field in (500, 800):
        table = read_values(folder / f"{field}Mhz-R1R2NOE.dat", columns=columns)
        np.testing.assert_array_equal(star_values.auth_seq_id, table.auth_seq_id)
        for quantity in table.quantities:
            found = by_name[f"{quantity.name}_{field}MHz"]
            np.testing.assert_allclose(found.value, quantity.value, rtol=5e-9)
            np.testing.assert_allclose(found.error, quantity.error, rtol=1e-6)
    sites = match_sites(read_structure(folder / "2lzm.pdb"), star_values)
    assert len(sites.mismatches) == 2


def test_lists_without_atoms_are_read(data_folder):
    values = read_values(data_folder / "public/nmrstar/bmr5687_noe_excerpt.str")
    assert [q.name for q in values.quantities] == ["NOE_500MHz", "NOE_600MHz"]
    assert values.quantities[0].value[0, 0] == 0.416
    assert values.quantities[0].error[0, 0] == 0.390


@pytest.mark.parametrize(
    ("name", "n_residues", "n_nitrogen"),
    [("nmrstar/bmr16656.str", 66, 63), ("nmrstar/bmr16570.str", 92, 83)],
)
def test_shift_lists_have_the_counts_of_their_sources(
    data_folder, name, n_residues, n_nitrogen
):
    values = read_values(data_folder / "public" / name)
    assert len(values.auth_seq_id) == n_residues
    nitrogen = next(q for q in values.quantities if q.name == "shift_N")
    assert int(np.isfinite(nitrogen.value).sum()) == n_nitrogen


def test_nef_and_star_of_one_entry_hold_the_same_shifts(data_folder):
    star_values = read_values(data_folder / "public/nmrstar/bmr16570.str")
    nef = read_values(data_folder / "public/nef/2kpu.nef.gz")
    np.testing.assert_array_equal(star_values.auth_seq_id, nef.auth_seq_id)
    np.testing.assert_array_equal(star_values.comp_id, nef.comp_id)
    for one, other in zip(star_values.quantities, nef.quantities, strict=True):
        assert one.name == other.name
        np.testing.assert_array_equal(one.value, other.value)


def test_homodimer_is_numbered_through_its_shift_list(data_folder):
    """A = Seq_ID + 19, B = Seq_ID + 90, as the list of the data says."""
    folder = data_folder / "public/nmrstar"
    values = read_values(folder / "bmr16656.str")
    sites = match_sites(read_structure(folder / "2kyi.pdb.gz"), values)
    assert [(c.auth_asym_id, c.offset, c.n_matched) for c in sites.chains] == [
        ("A", 19, 66),
        ("B", 90, 66),
    ]
    assert not sites.unmatched
