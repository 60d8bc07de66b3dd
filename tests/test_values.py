"""Reading measured values from tables."""

import gzip
import hashlib
import math
import random

import numpy as np
import pandas as pd
import pytest
from hypothesis import given
from hypothesis import strategies as st

from structmap.errors import FileProblemError, MissingExtraError, StructmapError
from structmap.values import read_mapping, read_values
from structmap.values.errors import (
    NoQuantityError,
    NoSiteColumnError,
    RaggedRowError,
    RepeatedRowError,
    UnclearColumnsError,
    UnreadableCellError,
)
from structmap.values.headers import split_name
from structmap.values.joining import file_marks

WIDE = "residue,R1,R1_error\n5,1.25,0.10\n6,1.50,0.20\n"


@pytest.fixture
def table(tmp_path):
    """Return a function that writes a table and reads it."""

    def write_and_read(text, *, name="values.csv", **options):
        path = tmp_path / name
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return read_values(path, **options)

    return write_and_read


def only(values):
    assert len(values.quantities) == 1
    return values.quantities[0]


def assert_wide(values):
    quantity = only(values)
    assert quantity.name == "R1"
    assert values.auth_seq_id.tolist() == [5, 6]
    np.testing.assert_array_equal(quantity.value, [[1.25], [1.5]])
    np.testing.assert_array_equal(quantity.error, [[0.1], [0.2]])


# --- wide tables ----------------------------------------------------------------------


def test_wide_table_gives_a_row_a_site(table):
    values = table(WIDE)
    assert_wide(values)
    assert values.line.tolist() == [2, 3]
    assert only(values).has_errors
    assert only(values).x.size == 0
    assert values.names == ("values.csv",)
    assert values.sha256 == (hashlib.sha256(WIDE.encode()).hexdigest(),)


@pytest.mark.parametrize("name", ["auth_seq_id", "residue", "resid", "res", "Residue"])
@pytest.mark.parametrize("suffix", ["_error", "_err", "_sd", " error"])
def test_names_of_columns_that_are_accepted(table, name, suffix):
    assert_wide(table(WIDE.replace("residue", name).replace("_error", suffix)))


def test_every_site_column_is_kept(table):
    values = table(
        "auth_asym_id,auth_seq_id,pdbx_PDB_ins_code,auth_comp_id,atom,group,R1\n"
        "A,56,A,lys,NZ,core,1\nB,-3,,G,,,2\n"
    )
    assert values.auth_asym_id.tolist() == ["A", "B"]
    assert values.auth_seq_id.tolist() == [56, -3]
    assert values.ins_code.tolist() == ["A", ""]
    assert values.comp_id.tolist() == ["LYS", "G"]
    assert values.atom.tolist() == ["NZ", ""]
    assert values.group.tolist() == ["core", ""]


@pytest.mark.parametrize(
    ("cell", "expected"),
    [
        ("56", ("", 56, "", "")),
        ("56A", ("", 56, "A", "")),
        ("-3", ("", -3, "", "")),
        ("\N{MINUS SIGN}3", ("", -3, "", "")),
        ("-3B", ("", -3, "B", "")),
        ("56.0", ("", 56, "", "")),
        ("A/56A", ("A", 56, "A", "")),
        ("LYS56", ("", 56, "", "LYS")),
    ],
)
def test_number_and_what_is_written_with_it(table, cell, expected):
    values = table(f"residue,R1\n{cell},1\n")
    found = values.auth_asym_id, values.auth_seq_id, values.ins_code, values.comp_id
    assert tuple(one[0] for one in found) == expected


def test_one_letter_names_before_the_number_are_told_from_chains(table):
    values = table("residue,R1\nK48,1\nG49,2\nT50,3\n")
    assert values.comp_id.tolist() == ["K", "G", "T"]
    with pytest.raises(
        UnreadableCellError, match=r"row 2: residue is 'A48'; the letter"
    ):
        table("residue,R1\nA48,1\nA49,2\n")


def test_residue_column_with_names_beside_a_number_column_is_the_name(table):
    values = table("resid,residue,R1\n4,LYS,1\n5,GLY,2\n")
    assert values.auth_seq_id.tolist() == [4, 5]
    assert values.comp_id.tolist() == ["LYS", "GLY"]


def test_units_come_from_brackets_or_from_a_comment(table):
    values = table("residue,R1rho [s-1],R1rho_error,S2,d (ppm)\n4,1,0.1,0.8,2\n")
    assert [(q.name, q.unit) for q in values.quantities] == [
        ("R1rho", "s-1"),
        ("S2", ""),
        ("d", "ppm"),
    ]
    values = table("# units R1 = s-1, NOE: none\nresidue,R1,NOE\n4,1,0.8\n")
    assert [q.unit for q in values.quantities] == ["s-1", "none"]


def test_bare_error_belongs_to_the_column_before_it(table):
    values = table("residue,R1,error,R2,error\n4,1,0.1,2,0.2\n")
    assert [q.error[0, 0] for q in values.quantities] == [0.1, 0.2]


@pytest.mark.parametrize("cell", ["", "NA", "nan", "NaN", "N/A", " "])
def test_missing_values_stay_missing(table, cell):
    values = table(f"residue,R1,R2\n4,{cell},1\n5,2,3\n")
    np.testing.assert_array_equal(values.quantities[0].value, [[math.nan], [2]])


def test_row_without_any_value_is_unmeasured_and_said(table):
    values = table("residue,R1\n4,NA\n5,2\n")
    assert values.auth_seq_id.tolist() == [5]
    assert "1 rows hold no value and count as unmeasured: 4." in values.notes


def test_error_of_zero_or_blank_is_not_given_and_said(table):
    values = table("residue,R1,R1_error\n4,1,0\n5,2,\n6,3,0.3\n")
    np.testing.assert_array_equal(only(values).error, [[math.nan], [math.nan], [0.3]])
    assert "values.csv: R1 has 1 error of 0, taken as not given." in values.notes
    assert not only(table("residue,R1,R1_error\n4,1,0\n5,2,0\n")).has_errors


def test_column_of_text_is_left_out_and_said(table):
    values = table("residue,R1,comment\n4,1,weak\n5,2,\n")
    assert [q.name for q in values.quantities] == ["R1"]
    assert (
        "values.csv: column 'comment' holds no numbers and was left out."
        in values.notes
    )


# --- long tables and profiles ---------------------------------------------------------


def test_long_table_gives_a_profile_on_the_union_of_x(table):
    values = table(
        "residue,chain,x [kHz],value [s-1],error\n"
        "4,A,8,3.0,0.1\n4,A,2,5.0,0.2\n5,A,8,1.0,0.1\n"
    )
    quantity = only(values)
    assert (quantity.name, quantity.unit) == ("value", "s-1")
    assert (quantity.x_name, quantity.x_unit) == ("x", "kHz")
    np.testing.assert_array_equal(quantity.x, [2, 8])
    np.testing.assert_array_equal(quantity.value, [[5, 3], [math.nan, 1]])
    np.testing.assert_array_equal(quantity.error, [[0.2, 0.1], [math.nan, 0.1]])


@pytest.mark.parametrize(
    "header", ["x,R1rho [s-1],R1rho_error", "x,value=R1rho [s-1],error"]
)
def test_header_of_a_long_table_may_name_the_quantity(table, header):
    quantity = only(table(f"residue,{header}\n4,1,2,0.1\n"))
    assert (quantity.name, quantity.unit, quantity.error[0, 0]) == ("R1rho", "s-1", 0.1)


def test_column_of_a_long_table_may_name_the_quantity(table):
    values = table("residue,quantity,x,value\n4,up,1,2\n4,down,1,3\n")
    assert [(q.name, q.value[0, 0]) for q in values.quantities] == [
        ("up", 2.0),
        ("down", 3.0),
    ]


def test_header_with_units_of_x_is_a_profile_and_said(table):
    values = table(
        "residue,R1rho_20kHz,R1rho_20kHz_err,R1rho_5kHz,R1rho_5kHz_err,R1rho_8.5kHz,R1rho_8.5kHz_err\n"
        "4,1,0.1,3,0.3,2,0.2\n"
    )
    quantity = only(values)
    assert (quantity.name, quantity.x_unit) == ("R1rho", "kHz")
    np.testing.assert_array_equal(quantity.x, [5, 8.5, 20])
    np.testing.assert_array_equal(quantity.value, [[3, 2, 1]])
    np.testing.assert_array_equal(quantity.error, [[0.3, 0.2, 0.1]])
    assert any(
        "recognised by their names as one profile of R1rho" in n for n in values.notes
    )


def test_static_fields_are_quantities_not_a_profile(table):
    values = table("residue,R1_500MHz,R1_600MHz,R1_800MHz\n4,1,2,3\n")
    assert [q.name for q in values.quantities] == [
        "R1_500MHz",
        "R1_600MHz",
        "R1_800MHz",
    ]


def test_profile_without_a_unit_in_its_header_is_asked_for(table):
    with pytest.raises(UnclearColumnsError, match=r"'R1rho_5'.* call them R1rho_5kHz"):
        table("residue,R1rho_5,R1rho_8,R1rho_12\n4,1,2,3\n")


def test_two_numbered_columns_are_two_quantities(table):
    values = table("residue,S2_1,S2_2\n4,1,2\n")
    assert [q.name for q in values.quantities] == ["S2_1", "S2_2"]


@given(
    points=st.dictionaries(
        st.tuples(st.integers(1, 6), st.sampled_from([0.5, 1.0, 2.0, 4.0])),
        st.tuples(st.floats(-5, 5), st.floats(0.01, 1)),
        min_size=2,
        max_size=20,
    ),
    seed=st.integers(0, 1000),
)
def test_order_of_rows_of_a_long_table_does_not_matter(tmp_path_factory, points, seed):
    rows = [f"{n},{x!r},{v!r},{e!r}" for (n, x), (v, e) in points.items()]
    path = tmp_path_factory.mktemp("long") / "v.csv"
    shuffled = random.Random(seed).sample(rows, len(rows))
    read = []
    for lines in (rows, shuffled):
        path.write_text("residue,x,value,error\n" + "\n".join(lines))
        values = read_values(path)
        order = np.argsort(values.auth_seq_id)
        quantity = only(values)
        read.append((quantity.x, quantity.value[order], quantity.error[order]))
    for one, other in zip(*read, strict=True):
        np.testing.assert_array_equal(one, other)
    found = {
        (int(values.auth_seq_id[row]), float(x)): (v, quantity.error[row, column])
        for row, line in enumerate(quantity.value)
        for column, (x, v) in enumerate(zip(quantity.x, line, strict=True))
        if not math.isnan(v)
    }
    assert found == points


# --- kinds of text --------------------------------------------------------------------


@pytest.mark.parametrize(
    ("separator", "named"),
    [
        (",", "comma"),
        ("\t", "tab"),
        (";", "semicolon"),
        ("  ", "spaces"),
        (", ", "comma"),
    ],
)
def test_separators_are_recognised_and_stated(table, separator, named):
    values = table(WIDE.replace(",", separator))
    assert_wide(values)
    assert f"values.csv: columns are parted by {named}." in values.notes


@pytest.mark.parametrize("separator", ["\t", ";", " "])
def test_decimal_commas_are_recognised_and_stated(table, separator):
    values = table(WIDE.replace(",", separator).replace(".", ","))
    assert_wide(values)
    assert "values.csv: decimal commas were read as decimal points." in values.notes


def test_quoted_decimal_commas_between_comma_separators(table):
    assert_wide(table('residue,"R1","R1_error"\n5,"1,25","0,10"\n6,"1,50","0,20"\n'))


def test_mixed_decimal_marks_are_refused(table):
    with pytest.raises(
        UnclearColumnsError, match="mix decimal commas with decimal points"
    ):
        table("residue;R1\n4;1,5\n5;1.5\n")


@pytest.mark.parametrize(
    "content",
    [
        b"\xef\xbb\xbf" + WIDE.encode(),
        WIDE.replace("\n", "\r\n").encode(),
        WIDE.replace("\n", "\r").encode(),
        WIDE.encode("utf-16"),
        gzip.compress(WIDE.encode()),
        (WIDE + "\n\n  \n\x1a").encode(),
        WIDE.rstrip("\n").encode(),
        (
            "# a comment, with commas\n\n" + WIDE.replace("\n6", "\n# another\n6")
        ).encode(),
    ],
    ids=["bom", "crlf", "cr", "utf16", "gzip", "trailing", "no-end", "comments"],
)
def test_ways_to_write_the_same_text(table, content):
    assert_wide(table(content))


def test_latin_1_is_read_and_said(table):
    values = table("residue,d [Å]\n4,1\n".encode("latin-1"))
    assert only(values).unit == "Å"
    assert "values.csv: not UTF-8, read as Latin-1." in values.notes


def test_lines_are_counted_as_an_editor_does(table):
    with pytest.raises(UnreadableCellError, match="row 5: R1 is 'x'"):
        table("# one\nresidue,R1\n4,1\n\n5,x\n")


def test_header_in_a_comment_is_used(table):
    assert_wide(table("# residue R1 R1_error\n5 1.25 0.10\n6 1.50 0.20\n"))


def test_unit_stays_with_its_name_between_spaces(table):
    assert only(table("residue R1 [s-1] R1_err\n4 1 0.1\n")).unit == "s-1"


def test_columns_name_a_table_without_header_and_skip(table):
    values = table(
        "5\t5\t1.25\t0.10\n6\t6\t1.50\t0.20\n", columns=("residue", "-", "R1", "R1_err")
    )
    assert_wide(values)
    assert values.line.tolist() == [1, 2]


def test_columns_replace_a_header(table):
    assert_wide(table(WIDE, columns=("residue", "R1", "R1_err")))


def test_columns_that_are_too_many_are_refused(table):
    with pytest.raises(RaggedRowError, match="row 1: 2 cells where 3 are due"):
        table("5,1.25\n6,1.5\n", columns=("residue", "R1", "R1_err"))


# --- workbooks and Parquet ------------------------------------------------------------


def frame():
    return pd.DataFrame({"residue": [5, 6], "R1": [1.25, 1.5], "R1_error": [0.1, 0.2]})


def test_workbook_is_read(tmp_path):
    path = tmp_path / "values.xlsx"
    with pd.ExcelWriter(path) as book:
        pd.DataFrame().to_excel(book, sheet_name="empty")
        frame().to_excel(book, sheet_name="rates", index=False)
        frame().to_excel(book, sheet_name="other", index=False)
    values = read_values(path)
    assert_wide(values)
    assert "values.xlsx: sheet 'rates' of 2 was read." in values.notes


def test_parquet_is_read(tmp_path):
    path = tmp_path / "values.parquet"
    frame().set_index(pd.Index([7, 8])).to_parquet(path)
    assert_wide(read_values(path))


def test_numbers_survive_workbook_and_parquet(tmp_path):
    """A workbook holds 16 digits as openpyxl writes it, Parquet every bit."""
    numbers = np.random.default_rng(1).normal(size=20)
    data = pd.DataFrame({"residue": np.arange(20), "R1": numbers})
    data.to_parquet(tmp_path / "v.parquet")
    data.to_excel(tmp_path / "v.xlsx", index=False)
    exact, near = (read_values(tmp_path / name) for name in ("v.parquet", "v.xlsx"))
    np.testing.assert_array_equal(only(exact).value[:, 0], numbers)
    np.testing.assert_allclose(only(near).value[:, 0], numbers, rtol=1e-15)


@pytest.mark.parametrize("name", ["values.xlsx", "values.parquet"])
def test_damaged_binary_tables_are_refused(tmp_path, name):
    path = tmp_path / name
    frame().to_excel(path) if name.endswith("xlsx") else frame().to_parquet(path)
    path.write_bytes(path.read_bytes()[:-200])
    with pytest.raises(FileProblemError, match="damaged"):
        read_values(path)


@pytest.mark.parametrize(
    ("name", "package", "extra"),
    [("v.xlsx", "openpyxl", "xlsx"), ("v.parquet", "pyarrow", "parquet")],
)
def test_missing_package_is_named(tmp_path, monkeypatch, name, package, extra):
    path = tmp_path / name
    path.write_bytes(b"PK\x03\x04" if name.endswith("xlsx") else b"PAR1")
    monkeypatch.setitem(__import__("sys").modules, package, None)
    with pytest.raises(
        MissingExtraError, match=rf"needs the package {package}.*\[{extra}\]"
    ):
        read_values(path)


# --- several files --------------------------------------------------------------------


def write(folder, **files):
    paths = []
    for name, text in files.items():
        path = folder / f"{name}.csv"
        path.write_text(text)
        paths.append(path)
    return paths


def test_files_are_joined_by_site(tmp_path):
    paths = write(tmp_path, a="residue,R1\n4,1\n5,2\n", b="residue,R2\n5,20\n6,30\n")
    values = read_values(paths)
    assert values.auth_seq_id.tolist() == [4, 5, 6]
    first, second = values.quantities
    np.testing.assert_array_equal(first.value[:, 0], [1, 2, math.nan])
    np.testing.assert_array_equal(second.value[:, 0], [math.nan, 20, 30])


def test_one_name_in_two_files_is_kept_apart_by_the_file_names(tmp_path):
    same = "residue,R1\n4,{}\n"
    paths = write(tmp_path, R1_500MHz=same.format(1), R1_600MHz=same.format(2))
    values = read_values(paths)
    assert [q.name for q in values.quantities] == ["R1_500MHz", "R1_600MHz"]
    assert any(note.startswith("R1 stands in R1_500MHz.csv") for note in values.notes)


def test_one_name_on_different_sites_is_one_quantity(tmp_path):
    values = read_values(write(tmp_path, a="residue,R1\n4,1\n", b="residue,R1\n5,2\n"))
    assert only(values).value.tolist() == [[1], [2]]
    assert "R1: the values of a.csv, b.csv were joined as one quantity." in values.notes


def test_profiles_are_merged_where_x_differs_and_kept_apart_where_it_repeats(tmp_path):
    text = "residue,x [kHz],value\n4,{},{}\n"
    merged = read_values(write(tmp_path, a=text.format(2, 5), b=text.format(8, 3)))
    np.testing.assert_array_equal(only(merged).x, [2, 8])
    apart = read_values(write(tmp_path, a=text.format(2, 5), b=text.format(2, 3)))
    assert [q.name for q in apart.quantities] == ["value_a", "value_b"]


def test_units_that_differ_keep_quantities_apart(tmp_path):
    paths = write(tmp_path, a="residue,T1 [s]\n4,1\n", b="residue,T1 [ms]\n5,900\n")
    assert [q.unit for q in read_values(paths).quantities] == ["s", "ms"]


def test_only_chain_named_is_taken_by_files_that_name_none(tmp_path):
    paths = write(tmp_path, a="residue,R1\n4,1\n", b="residue,chain,R2\n4,B,2\n")
    values = read_values(paths)
    assert values.auth_asym_id.tolist() == ["B"]
    assert "a.csv: no chain named, B taken." in values.notes


def test_files_without_chain_beside_several_chains_are_refused(tmp_path):
    paths = write(tmp_path, a="residue,R1\n4,1\n", b="residue,chain,R2\n4,A,2\n4,B,2\n")
    with pytest.raises(UnclearColumnsError, match="other files name chains A, B"):
        read_values(paths)


def test_amide_hydrogen_has_two_names(tmp_path):
    paths = write(tmp_path, a="residue,atom,p\n4,HN,1\n", b="residue,atom,q\n4,H,2\n")
    assert read_values(paths).atom.tolist() == ["HN"]


def test_names_that_differ_between_files_are_said(tmp_path):
    paths = write(tmp_path, a="residue,aa,p\n54,THR,1\n", b="residue,aa,q\n54,CYS,2\n")
    values = read_values(paths)
    assert values.comp_id.tolist() == ["THR"]
    assert any("54 is CYS there and THR in a file before it" in n for n in values.notes)


def test_file_given_twice_is_refused(tmp_path):
    paths = write(tmp_path, a=WIDE, b=WIDE)
    with pytest.raises(
        FileProblemError, match=r"b\.csv: has the content of a file before"
    ):
        read_values(paths)


def test_no_file_is_a_mistake_of_the_caller():
    with pytest.raises(ValueError, match=r"^paths is empty"):
        read_values([])


def test_marks_of_files_are_what_differs(tmp_path):
    names = ["500Mhz-R1R2NOE.dat", "600Mhz-R1R2NOE.dat"]
    assert file_marks([tmp_path / name for name in names]) == ["500Mhz", "600Mhz"]
    assert file_marks([tmp_path / "a/v.csv", tmp_path / "b/v.csv"]) == ["1", "2"]


# --- refusals -------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "error", "message"),
    [
        ("", FileProblemError, "is empty; give a table"),
        ("\n \n", FileProblemError, "is empty"),
        ("# only\n", FileProblemError, "holds nothing but comments"),
        ("residue,R1\n", FileProblemError, "has column names and no rows"),
        (
            "a,R1\n4,1\n",
            NoSiteColumnError,
            r"no column gives the residue number \(found: 'a', 'R1'\)",
        ),
        (
            "4,1.0\n5,2.0\n",
            NoSiteColumnError,
            "with --columns if the table has no header",
        ),
        ("residue,chain\n4,A\n", NoQuantityError, "no column holds a measured value"),
        ("residue,R1\n4,NA\n5,\n", NoQuantityError, "no column holds a measured value"),
        (
            "residue,R1\n4,abc\n5,1\n",
            UnreadableCellError,
            "row 2: R1 is 'abc'; write a number",
        ),
        ("residue,R1\n4,1_0\n", NoQuantityError, "no column holds"),
        ("residue,R1\n4,inf\n5,1\n", UnreadableCellError, "row 2: R1 is 'inf'"),
        ("residue,R1\n4,1e999\n5,1\n", UnreadableCellError, "row 2: R1 is '1e999'"),
        (
            "residue,R1\nx,1\n",
            UnreadableCellError,
            "row 2: residue is 'x'; write a residue number",
        ),
        ("residue,R1\n,1\n", UnreadableCellError, "row 2: residue is ''"),
        ("residue,R1\n1.5,1\n", UnreadableCellError, "row 2: residue is '1.5'"),
        (
            "residue,R1,R1_err\n4,1,-0.1\n",
            UnreadableCellError,
            "row 2: R1_err is '-0.1'; an error cannot be negative",
        ),
        (
            "residue,R1\n4,1\n5\n",
            RaggedRowError,
            "row 3: 1 cell where 2 are due; write NA",
        ),
        (
            "residue,R1\n4,1,2\n",
            RaggedRowError,
            "row 2: 3 cells where 2 are due; remove",
        ),
        (
            "residue,R1\n4,1\n5,1\n4,2\n",
            RepeatedRowError,
            "rows 2 and 4: both give site 4;",
        ),
        (
            "residue,x,value\n4,1,1\n4,2,1\n4,1,5\n",
            RepeatedRowError,
            "rows 2 and 4: both give site 4 at x = 1;",
        ),
        (
            "residue,x,value\n4,,1\n",
            UnreadableCellError,
            "row 2: x is ''; write the x of this point",
        ),
        (
            "residue,R1,R1\n4,1,2\n",
            UnclearColumnsError,
            "'R1', 'R1' have the same name",
        ),
        (
            "residue,resid,R1\n4,5,2\n",
            UnclearColumnsError,
            "'residue', 'resid' say the same of a site",
        ),
        (
            "residue,R1,R2_error\n4,1,2\n",
            UnclearColumnsError,
            "'R2_error' belongs to no column",
        ),
        ("residue,R1 [s],R1_err [ms]\n4,1,2\n", UnclearColumnsError, "differ in unit"),
        ("residue,x,x,value\n4,1,2,3\n", UnclearColumnsError, "all claim to be x"),
        (
            "residue,ins_code,R1\n4B,A,1\n",
            UnreadableCellError,
            "row 2: residue is '4B'; the column of pdbx_PDB_ins_code says 'A'",
        ),
        (
            "residue,aa,x,value\n4,LYS,1,1\n4,GLY,2,1\n",
            UnreadableCellError,
            "row 3: name is 'GLY'; row 2 gives 4 the name 'LYS'",
        ),
        (
            "residue,R_1kHz,R_1.0kHz,R_2kHz\n4,1,2,3\n",
            UnclearColumnsError,
            "repeat a point of a profile",
        ),
        (
            "HEADER    PROTEIN\nATOM  ",
            FileProblemError,
            "holds coordinates, not measured values",
        ),
        (b"\x00\x01\x02residue", FileProblemError, "is a binary file, not a table"),
        (b"%PDF-1.4 abc", FileProblemError, "is a PDF, not a table"),
        (b"\xd0\xcf\x11\xe0rest", FileProblemError, "old Excel"),
        (
            gzip.compress(WIDE.encode())[:-6],
            FileProblemError,
            "damaged or truncated gzip",
        ),
        (b"\xff\xfea", FileProblemError, "damaged UTF-16"),
    ],
)
def test_bad_tables_are_refused_in_one_line(table, text, error, message):
    with pytest.raises(error, match=message) as caught:
        table(text)
    shown = str(caught.value)
    assert "\n" not in shown
    assert "values.csv" in shown
    assert ";" in shown  # what is wrong; what to do
    assert isinstance(caught.value, StructmapError)


def test_missing_file_and_folder_are_refused(tmp_path):
    with pytest.raises(FileProblemError, match=r"v\.csv: there is no such file"):
        read_values(tmp_path / "v.csv")
    with pytest.raises(FileProblemError, match="is a folder"):
        read_values(tmp_path)


@given(st.binary(max_size=300))
def test_any_bytes_end_in_values_or_in_a_refusal(tmp_path_factory, content):
    path = tmp_path_factory.mktemp("any") / "v.csv"
    path.write_bytes(content)
    with pytest.raises(StructmapError, match=r"v\.csv"):
        read_values(path)


@given(st.text(alphabet="residu,R1_ \t;\n\"#[]'.0-5eNAx=", max_size=120))
def test_any_text_under_a_header_ends_in_values_or_in_a_refusal(tmp_path_factory, text):
    path = tmp_path_factory.mktemp("any") / "v.csv"
    path.write_text("residue,R1,R1_err\n" + text)
    try:
        values = read_values(path)
    except StructmapError:
        return
    assert np.isfinite(values.quantities[0].value).any()


def test_parts_of_a_name():
    parts = split_name("R1rho_error_2.5 kHz [s-1]")
    assert (parts.stem, parts.x, parts.x_unit, parts.unit) == (
        "R1rho",
        2.5,
        "kHz",
        "s-1",
    )
    assert parts.is_error
    assert split_name("R1 (600 MHz)").name == "R1 (600 MHz)"


# --- mapping --------------------------------------------------------------------------


def test_mapping_is_read_in_both_ways_to_write_it(tmp_path):
    path = tmp_path / "map.csv"
    path.write_text("from,to\n12,A/17\n13A,A/56B\n")
    short = read_mapping(path)
    path.write_text(
        "table_seq_id,table_ins_code,auth_asym_id,auth_seq_id,pdbx_PDB_ins_code\n"
        "12,,A,17,\n13,A,A,56,B\n14,,,,\n"
    )
    long = read_mapping(path)
    for one in (short, long):
        assert one.table_number.tolist() == [12, 13]
        assert one.table_ins_code.tolist() == ["", "A"]
        assert one.auth_asym_id.tolist() == ["A", "A"]
        assert one.auth_seq_id.tolist() == [17, 56]
        assert one.ins_code.tolist() == ["", "B"]


@pytest.mark.parametrize(
    ("text", "error", "message"),
    [
        ("from,to\n1,2\n1,3\n", RepeatedRowError, "rows 2 and 3: both give number 1"),
        ("to,R1\n1,2\n", UnclearColumnsError, "do not name table_seq_id"),
        ("from,R1\n1,2\n", NoSiteColumnError, "no column gives the residue number"),
        ("from,to\n1,x\n", UnreadableCellError, "row 2: to is 'x'"),
        ("from,to\n1,\n", FileProblemError, "maps no number"),
    ],
)
def test_bad_mappings_are_refused(tmp_path, text, error, message):
    path = tmp_path / "map.csv"
    path.write_text(text)
    with pytest.raises(error, match=message):
        read_mapping(path)


# --- real tables ----------------------------------------------------------------------


def test_real_tables_have_the_counts_of_their_sources(data_folder):
    """Counts from the list of the data: 76, 62, 112 of T4 lysozyme, 98 in all three."""
    public = data_folder / "public"
    values = read_values(public / "trp_repressor/trp_repressor_600.csv")
    assert [q.name for q in values.quantities] == ["R2", "NOE", "R1", "sigma_NH"]
    assert len(values.auth_seq_id) == 76
    assert [q.has_errors for q in values.quantities] == [True, True, True, False]
    values = read_values(public / "ubiquitin/ubiquitin_500.csv")
    assert len(values.auth_seq_id) == 62


def test_three_fields_of_t4_lysozyme_are_joined(data_folder):
    columns = ("auth_seq_id", "R1", "R1_error", "R2", "R2_error", "NOE", "NOE_error")
    folder = data_folder / "public/t4_lysozyme"
    paths = [folder / f"{field}Mhz-R1R2NOE.dat" for field in (500, 600, 800)]
    values = read_values(paths, columns=columns)
    names = [q.name for q in values.quantities]
    assert names[:3] == ["R1_500Mhz", "R1_600Mhz", "R1_800Mhz"]
    measured = [np.isfinite(q.value[:, 0]) for q in values.quantities[:3]]
    assert [int(one.sum()) for one in measured] == [112, 116, 112]
    assert int(np.all(measured, axis=0).sum()) == 98


def test_rates_and_times_of_t4_lysozyme_agree(data_folder):
    """R = 1/T to 5e-9 between the files, as the list of the data says."""
    folder = data_folder / "public/t4_lysozyme"
    rates = read_values(
        folder / "500Mhz-R1R2NOE.dat",
        columns=("residue", "R1", "R1_err", "R2", "R2_err", "NOE", "NOE_err"),
    )
    times = read_values(
        folder / "T4l_Good_500_800_25.dat",
        columns=("residue", "T1 [ms]", "T1_err", *["-"] * 10),
    )
    np.testing.assert_array_equal(rates.auth_seq_id, times.auth_seq_id)
    assert only(times).unit == "ms"
    np.testing.assert_allclose(
        rates.quantities[0].value, 1000 / only(times).value, rtol=5e-9
    )


def test_shift_changes_without_header_and_errors(data_folder):
    folder = data_folder / "public/gb1_pcs"
    paths = [folder / f"gb1_co_{n}.npc" for n in ("nta_pcs_hn", "pcs_hn", "ida_pcs_h")]
    values = read_values(paths, columns=("residue", "atom", "pcs [ppm]", "pcs_error"))
    counts = [int(np.isfinite(q.value).sum()) for q in values.quantities]
    assert counts == [42, 44, 32]
    assert not any(q.has_errors for q in values.quantities)
    assert np.nanmin(values.quantities[0].value) == pytest.approx(-1.41, abs=0.005)
    assert len(values.auth_seq_id) == 47  # HN in two files and H in one are one atom
