"""Bringing the numbering of values and coordinates together."""

import importlib.util
import random
from pathlib import Path

import gemmi
import numpy as np
import pytest
from Bio import Align
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import hypergeom

from structmap.sites import match_rows, match_sites, site_centres
from structmap.sites.alignment import (
    GAP_EXTEND,
    GAP_OPEN,
    MATCH,
    MISMATCH,
    align_sequences,
)
from structmap.sites.errors import (
    DisagreeingNamesError,
    DisagreeingResidueError,
    NoMatchError,
    RepeatedSiteError,
    UnclearMatchError,
    UnknownChainError,
    UnknownSiteError,
)
from structmap.sites.offsets import _chance_of_so_few
from structmap.structure import read_structure
from structmap.tables import Table, table_text
from structmap.values import read_mapping, read_values

DATA = Path(__file__).parent / "data"
# Thirty residues without repeats, prolines at 7, 17 and 27, when numbered from 1.
SEQUENCE = "MKTAYIPQRLDSEGHVWKPNFCTALPEDRQ"


def three(letters):
    return gemmi.expand_one_letter_sequence(letters, gemmi.ResidueKind.AA)


@pytest.fixture
def coordinates(tmp_path):
    """Return a function that writes chains of CA atoms and reads them.

    A chain is given as letters from a first number on; a small letter stands for a
    residue of the full sequence without coordinates.
    """

    def write_and_read(chains, *, sequence=True):
        lines: list[str] = []
        atoms: list[str] = []
        for x, (chain, (first, letters)) in enumerate(chains.items()):
            names = three(letters.upper())
            for start in range(0, len(names) if sequence else 0, 13):
                row = " ".join(names[start : start + 13])
                lines.append(
                    f"SEQRES {start // 13 + 1:3d} {chain} {len(names):4d}  {row}"
                )
            for n, (letter, name) in enumerate(zip(letters, names, strict=True)):
                if letter.isupper():
                    place = f"{name} {chain}{first + n:4d}"
                    xyz = f"{50.0 * x:8.3f}{3.8 * n:8.3f}{0:8.3f}"
                    atoms.append(
                        f"ATOM  {len(atoms) + 1:5d}  CA  {place}    {xyz}"
                        "  1.00 10.00           C  "
                    )
            atoms.append(
                f"TER   {len(atoms) + 1:5d}      {name} {chain}{first + n:4d} "
            )
        path = tmp_path / "model.pdb"
        path.write_text("\n".join([*lines, *atoms, "END"]) + "\n")
        return read_structure(path)

    return write_and_read


@pytest.fixture
def table(tmp_path):
    """Return a function that writes rows under a header and reads them."""

    def write_and_read(header, rows):
        path = tmp_path / "values.csv"
        lines = [",".join(str(cell) for cell in row) for row in rows]
        path.write_text("\n".join([header, *lines]) + "\n")
        return read_values(path)

    return write_and_read


def numbered(letters, first=1, *, skip="", offset=0):
    """Return rows of number, name and value for a sequence."""
    return [
        (n + offset, letter, 1.0 + n / 100)
        for n, letter in enumerate(letters, first)
        if letter not in skip
    ]


def load_script(path):
    spec = importlib.util.spec_from_file_location(path.stem, path)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


def labels(structure, sites):
    return [
        f"{structure.auth_asym_id[r]}{structure.auth_seq_id[r]}{structure.ins_code[r]}"
        for r in sites.residue
        if r >= 0
    ]


# --- alignment against a general library ----------------------------------------------

_LETTERS = "ACDEFGHIKLMNPQRSTVWY"


def outside_score(first, second):
    """Return the score of Biopython's pairwise aligner under the same rules."""
    aligner = Align.PairwiseAligner(mode="global")
    aligner.match_score, aligner.mismatch_score = MATCH, MISMATCH
    aligner.wildcard = "X"
    aligner.open_gap_score, aligner.extend_gap_score = GAP_OPEN, GAP_EXTEND
    aligner.end_gap_score = 0
    return aligner.score(first, second)


@given(
    st.text(alphabet="ACDX", min_size=1, max_size=25),
    st.text(alphabet="ACDX", min_size=1, max_size=25),
)
def test_score_of_alignment_is_that_of_biopython(first, second):
    found = align_sequences(first, second)
    assert found.score == outside_score(first, second)


@given(
    st.text(alphabet="ACDEX", min_size=1, max_size=25),
    st.text(alphabet="ACDEX", min_size=1, max_size=25),
)
def test_pairs_of_an_alignment_have_its_score(first, second):
    found = align_sequences(first, second)
    score, before = 0, None
    for a, b in found.pairs.tolist():
        score += (
            0
            if "X" in (first[a], second[b])
            else MATCH
            if first[a] == second[b]
            else MISMATCH
        )
        for gap in (a - before[0] - 1, b - before[1] - 1) if before else ():
            score += GAP_OPEN + (gap - 1) * GAP_EXTEND if gap else 0
        before = a, b
    assert score == found.score


@given(st.text(alphabet=_LETTERS, min_size=30, max_size=60), st.data())
def test_deletion_in_a_long_sequence_is_found(sequence, data):
    start = data.draw(st.integers(12, len(sequence) - 18))
    kept = [*range(start), *range(start + 3, len(sequence))]
    found = align_sequences("".join(sequence[n] for n in kept), sequence)
    agreeing = [sequence[kept[a]] == sequence[b] for a, b in found.pairs.tolist()]
    assert sum(agreeing) >= len(kept) - 2


# --- offsets by numbers ---------------------------------------------------------------


def test_equal_numbering_is_offset_zero(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    values = table("residue,aa,R1", numbered(SEQUENCE, skip="P"))
    bare = table("residue,x_ignored,R1", numbered(SEQUENCE, skip="P"))
    for one, how in ((values, "sequence"), (bare, "numbers")):
        sites = match_sites(structure, one)
        assert [(c.offset, c.how) for c in sites.chains] == [(0, how)]
        assert labels(structure, sites) == [
            f"A{n}" for n, letter in enumerate(SEQUENCE, 1) if letter != "P"
        ]


@pytest.mark.parametrize("shift", [-7, 3, 60, 200])
def test_prolines_tell_the_offset_of_amide_data(coordinates, table, shift):
    structure = coordinates({"A": (1, SEQUENCE * 3)})
    rows = [(n, v) for n, _, v in numbered(SEQUENCE * 3, skip="P", offset=shift)]
    sites = match_sites(structure, table("residue,R1", rows))
    assert sites.chains[0].offset == -shift
    assert not sites.unmatched
    assert any(note.startswith(f"Offset {-shift:+d} was taken") for note in sites.notes)


def test_offset_beyond_200_is_not_tried(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    rows = [(n, v) for n, _, v in numbered(SEQUENCE, offset=240)]
    with pytest.raises(
        NoMatchError, match=r"\(241 to 270\) is in model.pdb \(chain A 1 to 30\)"
    ):
        match_sites(structure, table("residue,R1", rows))


def test_full_sequence_counts_where_coordinates_are_missing(coordinates, table):
    """Rows on both unmodelled ends leave a single offset, which is not 0."""
    structure = coordinates({"A": (1, "mkta" + SEQUENCE[4:-3] + "drq")})
    rows = [(n, v) for n, _, v in numbered(SEQUENCE, offset=4)]
    sites = match_sites(structure, table("residue,R1", rows))
    assert sites.chains[0].offset == -4
    assert sites.chains[0].n_matched == 23
    assert len(sites.unmatched) == 7
    assert sites.unmatched[0] == "5: in the sequence of chain A, without coordinates"


def test_data_with_values_on_proline_keep_their_numbers(coordinates, table):
    """One offset happens to avoid the only proline; that says nothing."""
    letters = SEQUENCE.replace("P", "G", 2)
    structure = coordinates({"A": (1, letters)})
    rows = [(n, v) for n, _, v in numbered(letters) if n not in (11, 20)]
    sites = match_sites(structure, table("residue,R1", rows))
    assert sites.chains[0].offset == 0


def test_named_chain_with_every_number_there_keeps_its_numbers(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE * 3)})
    amide = [n for n, letter in enumerate(SEQUENCE * 3, 1) if letter != "P"]
    rows = [(n - 2, "A", 1.0) for n in amide if n > 2]
    sites = match_sites(structure, table("residue,chain,R1", rows))
    assert sites.chains[0].offset == 0
    assert any("+2 would put fewer values on proline" in note for note in sites.notes)


def test_two_offsets_equally_good_are_refused(coordinates, table):
    structure = coordinates({"A": (1, "A" * 10)})
    rows = [(n, 1.0) for n in range(30, 39)]
    message = "chain A at offset -29 and chain A at offset -28; state one with --offset"
    with pytest.raises(UnclearMatchError, match=message):
        match_sites(structure, table("residue,R1", rows))


def test_offset_zero_is_taken_among_equally_good(coordinates, table):
    structure = coordinates({"A": (1, "A" * 10)})
    rows = [(n, 1.0) for n in range(2, 9)]
    assert match_sites(structure, table("residue,R1", rows)).chains[0].offset == 0


def test_two_chains_that_fit_equally_well_are_refused(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE), "B": (1, SEQUENCE[::-1])})
    rows = [(n, 1.0) for n in range(5, 12)]
    message = (
        "chain A at offset .* and chain B at offset .*; name the chain of each row"
    )
    with pytest.raises(UnclearMatchError, match=message):
        match_sites(structure, table("residue,R1", rows))


def test_stated_offset_overrides(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    values = table("residue,aa,R1", numbered(SEQUENCE))
    sites = match_sites(structure, values, offset=2)
    assert [(c.offset, c.how) for c in sites.chains] == [(2, "given")]
    assert labels(structure, sites)[0] == "A3"
    assert len(sites.unmatched) == 2
    assert sites.unmatched[0] == "29: no residue of the coordinates has that number"
    assert len(sites.mismatches) > 20  # said, not refused: the user's word


@settings(max_examples=25)
@given(st.integers(-150, 150), st.sets(st.integers(1, 90), min_size=60))
def test_shift_of_all_numbers_shifts_the_offset(tmp_path_factory, shift, numbers):
    structure = read_structure(DATA / "pdb1ubi.pdb")
    names = {
        int(n): str(name)
        for n, name, kind in zip(
            structure.auth_seq_id,
            structure.auth_comp_id,
            structure.kind_of_residue,
            strict=True,
        )
        if kind == 0
    }
    path = tmp_path_factory.mktemp("shift") / "v.csv"
    rows = [f"{n + shift},{names[n]},1" for n in sorted(numbers) if n in names]
    path.write_text("residue,aa,R1\n" + "\n".join(rows))
    sites = match_sites(structure, read_values(path))
    assert sites.chains[0].offset == -shift
    assert sites.chains[0].n_agreeing == len(rows)


@settings(max_examples=15)
@given(st.randoms(use_true_random=False), st.integers(-3, 3))
def test_order_of_rows_does_not_matter(tmp_path_factory, shuffler, shift):
    structure = read_structure(DATA / "1orc.pdb")
    polymer = structure.kind_of_residue == 0
    rows = [
        f"{n + shift}{code},{name},{k}"
        for k, (n, code, name) in enumerate(
            zip(
                structure.auth_seq_id[polymer],
                structure.ins_code[polymer],
                structure.auth_comp_id[polymer],
                strict=True,
            )
        )
    ]
    found = []
    for order in (rows, shuffler.sample(rows, len(rows))):
        path = tmp_path_factory.mktemp("order") / "v.csv"
        path.write_text("residue,aa,R1\n" + "\n".join(order))
        values = read_values(path)
        sites = match_sites(structure, values)
        measured = values.quantities[0].value[sites.row, 0].tolist()
        found.append((sites.name.tolist(), sites.residue.tolist(), measured))
    assert found[0] == found[1]


@given(st.integers(1, 300), st.data())
def test_chance_of_so_few_prolines_is_the_hypergeometric_law(size, data):
    n_marked = data.draw(st.integers(0, size))
    n_drawn = data.draw(st.integers(0, size))
    few = data.draw(st.integers(0, n_drawn))
    told = _chance_of_so_few(few, size, n_marked, n_drawn)
    assert told == pytest.approx(hypergeom.cdf(few, size, n_marked, n_drawn), abs=1e-10)


# --- names ----------------------------------------------------------------------------


def test_names_that_differ_are_reported_by_the_number_of_the_table(coordinates, table):
    structure = coordinates({"A": (11, SEQUENCE)})
    mutated = SEQUENCE[:3] + "W" + SEQUENCE[4:]
    sites = match_sites(structure, table("residue,aa,R1", numbered(mutated)))
    assert sites.chains[0].offset == 10
    assert sites.mismatches == ("4: W in the table, ALA in the coordinates",)
    match = sites.chains[0]
    assert (match.n_matched, match.n_named, match.n_agreeing) == (30, 30, 29)


def test_more_than_a_tenth_of_names_that_differ_is_refused(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    mutated = "WWWW" + SEQUENCE[4:]
    message = r"4 of 30 named residues differ from model.pdb .*\(1: W in the table, MET"
    with pytest.raises(DisagreeingNamesError, match=message):
        match_sites(structure, table("residue,aa,R1", numbered(mutated)))


@pytest.mark.parametrize(
    ("table_name", "letter"), [("MSE", "M"), ("HIE", "H"), ("h", "H")]
)
def test_modified_residues_and_protonation_states_agree(
    coordinates, table, table_name, letter
):
    structure = coordinates({"A": (1, SEQUENCE)})
    rows = [
        (n, table_name if name == letter else name, v)
        for n, name, v in numbered(SEQUENCE)
    ]
    sites = match_sites(structure, table("residue,aa,R1", rows))
    assert not sites.mismatches
    assert sites.chains[0].n_agreeing == 30


def test_sequential_numbers_are_aligned_with_a_gapped_numbering(table):
    """Trypsin in chymotrypsin numbering, measured as 1 to 223."""
    structure = read_structure(DATA / "1gbt.cif.gz")
    polymer = np.flatnonzero(structure.kind_of_residue == 0)
    rows = [
        (n, structure.auth_comp_id[residue], 1.0)
        for n, residue in enumerate(polymer, 1)
        if n % 4
    ]
    values = table("residue,aa,R1", rows)
    sites = match_sites(structure, values)
    assert sites.residue.tolist() == [polymer[n - 1] for n, _, _ in rows]
    assert any(
        "its offset varies (1 to 19: +15, 21 to 47: +17, " in note
        for note in sites.notes
    )
    assert sites.chains[0].how == "sequence"


def test_table_with_a_deletion_is_aligned(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    shorter = SEQUENCE[:12] + SEQUENCE[16:]
    sites = match_sites(structure, table("residue,aa,R1", numbered(shorter)))
    assert labels(structure, sites) == [
        f"A{n}" for n in (*range(1, 13), *range(17, 31))
    ]
    assert not sites.mismatches


@pytest.mark.parametrize("name", ["1gbt.cif.gz", "4zhl.cif.gz", "1orc.pdb"])
def test_numbers_with_insertion_codes_find_their_residues(table, name):
    structure = read_structure(DATA / name)
    polymer = np.flatnonzero(structure.kind_of_residue == 0)
    assert (structure.ins_code[polymer] != "").sum() > 3
    rows = [
        (
            structure.auth_asym_id[r],
            f"{structure.auth_seq_id[r]}{structure.ins_code[r]}",
            1,
        )
        for r in polymer
    ]
    sites = match_sites(structure, table("chain,residue,R1", rows))
    assert sites.residue.tolist() == polymer.tolist()
    assert {c.offset for c in sites.chains} == {0}


# --- chains and copies ----------------------------------------------------------------


def test_chains_of_equal_sequence_are_copies_with_their_own_numbers(coordinates, table):
    structure = coordinates({"A": (20, SEQUENCE), "B": (91, SEQUENCE)})
    sites = match_sites(structure, table("residue,aa,R1", numbered(SEQUENCE)))
    assert [(c.auth_asym_id, c.offset, c.how) for c in sites.chains] == [
        ("A", 19, "sequence"),
        ("B", 90, "copy"),
    ]
    rows = match_rows(structure, table("residue,aa,R1", numbered(SEQUENCE)), sites)
    assert rows[0]["copies"] == "A/20 B/91"
    assert sites.copy_site.tolist() == np.repeat(np.arange(30), 2).tolist()
    assert "Chain B is a copy of a measured chain: same sequence." in sites.notes


def test_named_chain_has_copies_unless_they_are_turned_off(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE), "B": (1, SEQUENCE)})
    values = table("chain,residue,R1", [("B", n, 1.0) for n in range(1, 31)])
    sites = match_sites(structure, values)
    assert labels(structure, sites)[0] == "B1"
    assert len(sites.copy_site) == 60
    alone = match_sites(structure, values, named_chains_only=True)
    assert len(alone.copy_site) == 30
    assert {str(structure.auth_asym_id[r]) for r in alone.copy_residue} == {"B"}


def test_chains_with_rows_of_their_own_are_sites_of_their_own(coordinates, table):
    structure = coordinates(dict.fromkeys("ABC", (1, SEQUENCE)))
    rows = [(c, n, 1.0) for c in "AB" for n in range(1, 31)]
    sites = match_sites(structure, table("chain,residue,R1", rows))
    assert len(sites.name) == 60
    assert [(c.auth_asym_id, c.how) for c in sites.chains] == [
        ("A", "numbers"),
        ("C", "copy"),
        ("B", "numbers"),
    ]
    assert len(sites.copy_site) == 90


def test_residue_that_only_a_copy_has_is_found_there(coordinates, table):
    structure = coordinates(
        {"A": (1, SEQUENCE[:10]), "B": (1, SEQUENCE[:12])}, sequence=False
    )
    values = table("chain,residue,R1", [("A", n, 1.0) for n in range(1, 13)])
    sites = match_sites(structure, values)
    assert not sites.unmatched
    assert sites.name[-2:].tolist() == ["B/11", "B/12"]


def test_short_peptide_is_no_copy_of_a_part_of_a_long_chain(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE), "B": (101, SEQUENCE[10:16])})
    values = table("chain,residue,R1", [("A", n, 1.0) for n in range(1, 31)])
    assert len(match_sites(structure, values).copy_site) == 30


def test_label_name_of_a_chain_is_accepted_after_the_author_names(table):
    structure = read_structure(DATA / "4zhl.cif.gz")
    label = structure.chain_copies[1].label_asym_id
    assert label != structure.chain_copies[1].auth_asym_id
    first = int(structure.auth_seq_id[structure.copy_of_residue == 1][0])
    sites = match_sites(structure, table("chain,residue,R1", [(label, first, 1.0)]))
    assert structure.copy_of_residue[sites.residue[0]] == 1


def test_chain_that_the_coordinates_lack_is_refused(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    values = table("chain,residue,R1", [("A", 1, 1.0), ("Q", 2, 1.0)])
    message = r"row 3: chain 'Q' is not a polymer chain of model.pdb \(it has chain A\)"
    with pytest.raises(UnknownChainError, match=message):
        match_sites(structure, values)


def test_rows_of_one_chain_may_all_be_unmatched(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE), "B": (1, SEQUENCE[::-1])})
    rows = [("A", n, 1.0) for n in range(1, 20)] + [("B", 900, 2.0)]
    sites = match_sites(structure, table("chain,residue,R1", rows))
    assert sites.unmatched == ("B/900: no residue of chain B has that number",)
    assert sites.name[-1] == "B/900"
    assert sites.residue[-1] == -1


def test_unmatched_row_never_takes_the_name_of_a_matched_one(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    values = table("chain,residue,R1", [("A", n, 1.0) for n in (5, 35, 40)])
    sites = match_sites(structure, values, offset=-30)
    assert sites.name.tolist() == ["A/5", "A/10", "A/5 (table)"]
    assert sites.row.tolist() == [1, 2, 0]


def test_ncs_copies_are_copies_of_their_site(data_folder, table):
    structure = read_structure(data_folder / "public/ncs/5cvz_final.pdb")
    sites = match_sites(structure, table("chain,residue,R1", [("A", 30, 1.0)]))
    assert len(sites.copy_residue) == 20  # the chain and 19 operators not given
    originals = structure.original_residue[sites.copy_residue]
    assert set(originals.tolist()) == {int(sites.residue[0])}


# --- mapping, exclusion, repeated sites -----------------------------------------------


def test_mapping_decides_residue_by_residue(coordinates, table, tmp_path):
    structure = coordinates({"A": (1, SEQUENCE), "B": (1, SEQUENCE[::-1])})
    path = tmp_path / "map.csv"
    path.write_text("from,to\n101,A/5\n102,B/7\n")
    values = table("residue,R1", [(101, 1.0), (102, 2.0), (103, 3.0)])
    sites = match_sites(structure, values, mapping=read_mapping(path))
    assert sites.name.tolist() == ["A/5", "B/7", "103"]
    assert sites.row.tolist() == [0, 1, 2]
    assert {c.how for c in sites.chains} == {"given"}


def test_table_of_a_match_reads_back_as_a_mapping(coordinates, table, tmp_path):
    structure = coordinates({"A": (11, SEQUENCE)})
    values = table("residue,aa,R1", [*numbered(SEQUENCE), (99, "G", 1.0)])
    sites = match_sites(structure, values)
    rows = match_rows(structure, values, sites)
    listing = Table(columns=tuple(rows[0]), rows=tuple(tuple(r.values()) for r in rows))
    path = tmp_path / "map.csv"
    path.write_text(table_text(listing))
    again = match_sites(structure, values, mapping=read_mapping(path))
    assert again.name.tolist() == sites.name.tolist()
    assert again.residue.tolist() == sites.residue.tolist()


def test_mapping_to_a_residue_that_is_not_there_is_refused(
    coordinates, table, tmp_path
):
    structure = coordinates({"A": (1, SEQUENCE)})
    path = tmp_path / "map.csv"
    path.write_text("from,to\n1,A/1\n2,A/33\n")
    message = (
        r"map.csv, row 3: residue A/33 is not in model.pdb \(nearest there: A/30 GLN\)"
    )
    with pytest.raises(DisagreeingResidueError, match=message):
        match_sites(
            structure,
            table("residue,R1", [(1, 1.0), (2, 1.0)]),
            mapping=read_mapping(path),
        )


def test_mapping_without_a_measured_number_is_refused(coordinates, table, tmp_path):
    path = tmp_path / "map.csv"
    path.write_text("from,to\n1,A/1\n")
    with pytest.raises(NoMatchError, match=r"map.csv maps numbers 1 to 1"):
        match_sites(
            coordinates({"A": (1, SEQUENCE)}),
            table("residue,R1", [(5, 1.0)]),
            mapping=read_mapping(path),
        )


@pytest.mark.parametrize("name", ["A/5", "5", "B/25"])
def test_sites_are_left_out_by_name_of_any_copy(coordinates, table, name):
    structure = coordinates({"A": (1, SEQUENCE), "B": (21, SEQUENCE)})
    values = table("chain,residue,R1", [("A", n, 1.0) for n in range(1, 31)])
    sites = match_sites(structure, values, exclude=(name,))
    assert "A/5" not in sites.name
    assert len(sites.name) == 29
    assert "Left out as asked: A/5." in sites.notes


def test_site_to_leave_out_that_is_not_there_is_refused(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    values = table("residue,aa,R1", numbered(SEQUENCE))
    with pytest.raises(UnknownSiteError, match="--exclude A/31: no measured site"):
        match_sites(structure, values, exclude=("A/31",))


def test_atoms_of_one_residue_are_sites_of_their_own(coordinates, table):
    structure = coordinates({"A": (1, SEQUENCE)})
    values = table("residue,atom,R1", [(3, "HG2", 1.0), (3, "HB", 2.0), (4, "", 3.0)])
    sites = match_sites(structure, values)
    assert sites.name.tolist() == ["A/3/HB", "A/3/HG2", "A/4"]
    assert sites.residue[0] == sites.residue[1]
    assert sites.atom.tolist() == ["HB", "HG2", ""]
    left = match_sites(structure, values, exclude=("A/3/HB",))
    assert left.name.tolist() == ["A/3/HG2", "A/4"]


def test_two_rows_on_one_residue_are_refused(coordinates, table, tmp_path):
    path = tmp_path / "map.csv"
    path.write_text("from,to\n1,A/5\n2,A/5\n")
    with pytest.raises(RepeatedSiteError, match="rows 2 and 3: both fall on A/5"):
        match_sites(
            coordinates({"A": (1, SEQUENCE)}),
            table("residue,R1", [(1, 1.0), (2, 1.0)]),
            mapping=read_mapping(path),
        )


# --- where sites lie ------------------------------------------------------------------


def test_centre_is_the_mean_of_the_atoms_that_gemmi_reads(table):
    model = gemmi.read_structure(str(DATA / "pdb1ubi.pdb"))[0]
    values = table("residue,R1", [(n, 1.0) for n in (2, 40, 99)])
    structure = read_structure(DATA / "pdb1ubi.pdb")
    sites = match_sites(structure, values, offset=0)
    centres = site_centres(structure, sites)
    for number, centre in zip((2, 40), centres, strict=False):
        atoms = [
            a.pos.tolist() for a in model["A"][str(number)][0] if not a.is_hydrogen()
        ]
        np.testing.assert_allclose(centre, np.mean(atoms, axis=0), atol=1e-9)
    assert np.isnan(centres[2]).all()


def test_centre_is_taken_in_the_first_model_without_hydrogens(table):
    path = DATA / "1as5.cif.gz"
    chain = gemmi.read_structure(str(path))[0]["A"]
    structure = read_structure(path)
    first = chain[0]
    sites = match_sites(structure, table("residue,R1", [(first.seqid.num, 1.0)]))
    atoms = [a.pos.tolist() for a in first if not a.is_hydrogen()]
    np.testing.assert_allclose(
        site_centres(structure, sites)[0], np.mean(atoms, axis=0), atol=1e-9
    )


# --- real pairs -----------------------------------------------------------------------


def test_trp_repressor_is_found_five_numbers_on(data_folder):
    """Coordinate number = table number - 5, sites 111-113 not in the coordinates."""
    folder = data_folder / "public/trp_repressor"
    structure = read_structure(folder / "trp_repressor.cif")
    values = read_values(folder / "trp_repressor_600.csv")
    sites = match_sites(structure, values)
    assert [(c.auth_asym_id, c.offset, c.n_matched) for c in sites.chains] == [
        ("R", -5, 73)
    ]
    assert [text.split(":")[0] for text in sites.unmatched] == ["111", "112", "113"]
    on_proline = structure.auth_comp_id[sites.residue[sites.residue >= 0]] == "PRO"
    assert not on_proline.any()


@pytest.mark.parametrize(
    "coordinates", ["archive/pdb1ubi.pdb", "archive/2k39_ca.pdb.gz"]
)
def test_ubiquitin_has_equal_numbers(data_folder, coordinates):
    structure = read_structure(data_folder / coordinates)
    values = read_values(data_folder / "public/ubiquitin/ubiquitin_500.csv")
    sites = match_sites(structure, values)
    assert [(c.offset, c.n_matched) for c in sites.chains] == [(0, 62)]


def test_t4_lysozyme_matches_at_three_fields_and_names_two_mutations(
    data_folder, tmp_path
):
    """The sample of 500 and 800 MHz has C54T and C97A, says its source."""
    folder = data_folder / "public/t4_lysozyme"
    structure = read_structure(folder / "2lzm.pdb")
    columns = ("auth_seq_id", "R1", "R1_error", "R2", "R2_error", "NOE", "NOE_error")
    paths = [folder / f"{field}Mhz-R1R2NOE.dat" for field in (500, 600, 800)]
    sites = match_sites(structure, read_values(paths, columns=columns))
    assert [(c.offset, c.n_matched) for c in sites.chains] == [(0, 130)]
    named = tmp_path / "named.csv"
    block = gemmi.cif.read(str(folder / "t4l_relaxation.str"))[0]
    frame = next(
        item.frame for item in block if item.frame and item.frame.find_loop("_T1.Val")
    )
    rows = frame.find("_T1.", ["Seq_ID", "Comp_ID", "Val", "Val_err"])
    named.write_text(
        "\n".join(["residue,aa,T1,T1_error", *(",".join(row) for row in rows)])
    )
    sites = match_sites(structure, read_values(named))
    assert sites.mismatches == (
        "54: THR in the table, CYS in the coordinates",
        "97: ALA in the table, CYS in the coordinates",
    )


def test_gb1_matches_with_its_two_mutations_unnamed(data_folder):
    folder = data_folder / "public/gb1_pcs"
    structure = read_structure(folder / "2qmt.pdb")
    columns = ("residue", "atom", "pcs [ppm]", "pcs_error")
    values = read_values(folder / "gb1_co_nta_pcs_hn.npc", columns=columns)
    sites = match_sites(structure, values)
    assert [(c.offset, c.n_matched) for c in sites.chains] == [(0, 42)]
    assert set(sites.atom.tolist()) == {"HN"}


def test_homodimer_of_two_numberings_is_found_by_its_names(data_folder, tmp_path):
    folder = data_folder / "public/nmrstar"
    lines = (folder / "bmr16656.str").read_text().splitlines()
    rows = [r for r in map(str.split, lines) if len(r) > 15 and r[9] == "15"]
    shifts = [f"{r[5]},{r[6]},{r[10]}" for r in rows if r[7] == "N"]
    assert len(shifts) == 63
    path = tmp_path / "shifts.csv"
    path.write_text("\n".join(["residue,aa,d15N [ppm]", *shifts]))
    structure = read_structure(folder / "2kyi.pdb.gz")
    sites = match_sites(structure, read_values(path))
    assert [(c.auth_asym_id, c.offset) for c in sites.chains] == [("A", 19), ("B", 90)]
    assert not sites.mismatches
    assert len(sites.copy_site) == 2 * 63


def test_negative_numbers_of_a_file_without_metadata(data_folder, table):
    path = data_folder / "archive/6wqa.cif.gz"
    chain = gemmi.read_structure(str(path))[0]["A"]
    rows = [(r.seqid.num, r.name, 1.0) for r in list(chain)[:12]]
    assert rows[0][0] == -2
    structure = read_structure(path)
    sites = match_sites(structure, table("residue,aa,R1", rows))
    assert sites.chains[0].offset == 0
    assert sites.name.tolist() == [f"A/{n}" for n, _, _ in rows]


@pytest.mark.parametrize("n_points", [1, 4])
@pytest.mark.parametrize(
    "name",
    [
        "1orc.pdb",
        "1gbt.cif.gz",
        "4zhl.cif.gz",
        "1a28.pdb.gz",
        "3jqh.cif",
        "1pfe.cif.gz",
    ],
)
def test_planted_tables_are_laid_on_their_own_residues(
    planted_folder, tmp_path, name, n_points
):
    planted = load_script(planted_folder / "planted.py")
    graph = planted.SiteGraph(DATA / name)
    seed = random.Random(name).randrange(100)
    planted.write(graph, planted.plant(graph, seed=seed, k=n_points, units=0), tmp_path)
    values = read_values(tmp_path / "values.csv")
    structure = read_structure(DATA / name)
    sites = match_sites(structure, values)
    assert not sites.unmatched
    assert {c.offset for c in sites.chains} == {0}
    assert (structure.auth_seq_id[sites.residue] == values.auth_seq_id[sites.row]).all()
    assert (structure.ins_code[sites.residue] == values.ins_code[sites.row]).all()
    measured = {(s["chain"], s["residue"]): s["chains"] for s in graph.sites}
    for site in range(len(sites.name)):
        row = sites.row[site]
        key = f"{values.auth_seq_id[row]}{values.ins_code[row]}"
        chains = measured[str(values.auth_asym_id[row]), key]
        copies = sites.copy_residue[sites.copy_site == site]
        assert set(structure.auth_asym_id[copies].tolist()) <= set(chains)
