import os
import subprocess
import sys
from pathlib import Path

import pytest

from structmap.cli import main
from structmap.version import __version__

COORDINATES = Path(__file__).parent.parent / "examples" / "4cup.cif.gz"
GOOD = (
    "auth_seq_id,R2,R2_error\n1890,9.0,0.3\n1891,9.1,0.3\n1893,8.8,0.3\n1894,3.1,0.2\n"
)


def refused(capsys, *arguments):
    """Run a call that cannot be done; return its one line on stderr."""
    assert main([str(word) for word in arguments]) == 1
    caught = capsys.readouterr()
    assert caught.out == ""
    lines = caught.err.splitlines()
    assert len(lines) == 1, caught.err
    assert lines[0].startswith("structmap: ")
    return lines[0]


def values_file(folder, text=GOOD, name="values.csv"):
    path = folder / name
    path.write_text(text)
    return path


def test_version_and_help(capsys):
    with pytest.raises(SystemExit) as ended:
        main(["--version"])
    assert ended.value.code == 0
    assert capsys.readouterr().out == f"structmap {__version__}\n"


@pytest.mark.parametrize("command", ["analyse", "example", "match", "contacts"])
def test_help_of_each_command_shows_a_working_example(capsys, command):
    with pytest.raises(SystemExit) as ended:
        main([command, "--help"])
    assert ended.value.code == 0
    assert f"structmap {command} " in capsys.readouterr().out.split("example:")[1]


@pytest.mark.parametrize(
    "call", [["dance"], ["analyse"], ["contacts", "x", "--cutoff", "y"]]
)
def test_a_wrong_call_ends_with_2(call):
    with pytest.raises(SystemExit) as ended:
        main(call)
    assert ended.value.code == 2


def test_show_settings_prints_toml(capsys):
    with pytest.raises(SystemExit) as ended:
        main(["analyse", "--show-settings"])
    assert ended.value.code == 0
    assert "cutoff_angstrom = 4.5" in capsys.readouterr().out


@pytest.mark.parametrize(
    ("text", "said"),
    [
        (GOOD.replace("9.1", "high"), "values.csv, "),
        (GOOD.replace("9.1,0.3", "9.1,-0.3"), "values.csv, "),
        (GOOD + "1890,9.0,0.3\n", "values.csv, "),
        (GOOD.replace("auth_seq_id", "what"), "values.csv"),
        ("", "values.csv"),
        ("auth_seq_id,R2\n5001,3\n5002,4\n5003,4\n", "values.csv"),
    ],
    ids=["text", "negative", "twice", "no site column", "empty", "no row matches"],
)
def test_a_bad_table_is_refused_in_one_line(tmp_path, capsys, text, said):
    path = values_file(tmp_path, text)
    line = refused(
        capsys, "analyse", COORDINATES, path, "--offset", "0", "-o", tmp_path / "out"
    )
    assert said in line
    assert "; " in line or ": " in line.split(said)[1]
    assert not (tmp_path / "out").exists()
    assert path.read_text() == text


@pytest.mark.parametrize(
    "content",
    [
        b"",
        b"\x00\x01\x02binary" * 99,
        b"data_x\nloop_\n_atom_site.id\n",
        b"\x1f\x8b\x08truncated",
    ],
    ids=["empty", "binary", "no atoms", "truncated"],
)
def test_bad_coordinates_are_refused_in_one_line(tmp_path, capsys, content):
    path = (
        tmp_path / "model.cif.gz" if content[:1] == b"\x1f" else tmp_path / "model.cif"
    )
    path.write_bytes(content)
    line = refused(
        capsys, "analyse", path, values_file(tmp_path), "-o", tmp_path / "out"
    )
    assert path.name in line
    assert not (tmp_path / "out").exists()
    assert path.read_bytes() == content


def test_missing_files_are_named(tmp_path, capsys):
    gone = tmp_path / "gone.cif"
    line = refused(
        capsys, "analyse", gone, values_file(tmp_path), "-o", tmp_path / "out"
    )
    assert "gone.cif" in line
    line = refused(
        capsys, "analyse", COORDINATES, tmp_path / "no.csv", "-o", tmp_path / "out"
    )
    assert "no.csv" in line


def test_an_output_that_is_a_file_is_refused_before_any_work(tmp_path, capsys):
    path = values_file(tmp_path)
    line = refused(capsys, "analyse", COORDINATES, path, "-o", path)
    assert "values.csv: is a file, not a folder" in line
    assert path.read_text() == GOOD


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write anywhere")
def test_a_folder_that_may_not_be_written(tmp_path, capsys):
    locked = tmp_path / "locked"
    locked.mkdir(mode=0o500)
    line = refused(
        capsys,
        "analyse",
        COORDINATES,
        values_file(tmp_path),
        "--offset",
        "0",
        "-o",
        locked / "out",
    )
    assert "cannot be written" in line


def test_a_setting_file_with_a_slip_is_refused(tmp_path, capsys):
    settings = values_file(tmp_path, "cutof_angstrom = 4.0\n", "s.toml")
    call = ["analyse", COORDINATES, values_file(tmp_path), "-o", tmp_path / "out"]
    line = refused(capsys, *call, "--settings", settings)
    assert (
        "s.toml: setting cutof_angstrom is no setting; did you mean cutoff_angstrom?"
        in line
    )
    settings.write_text("cutoff_angstrom == 4\n")
    assert "s.toml: is no TOML file" in refused(capsys, *call, "--settings", settings)


def test_match_prints_a_table_and_says_the_offset(capsys):
    folder = COORDINATES.parent
    assert main(["match", str(COORDINATES), str(folder / "invented_values.csv")]) == 0
    caught = capsys.readouterr()
    assert len(caught.out.splitlines()) == 103
    assert "offset +1855" in caught.err
    assert "102 of 102 names agree" in caught.err


def test_contacts_of_a_crystal(tmp_path, capsys):
    path = tmp_path / "contacts.csv"
    assert main(["contacts", str(COORDINATES), "-o", str(path)]) == 0
    said = capsys.readouterr().out
    # Counted by two independent routes for this entry (see tests/test_contacts.py).
    assert "498 chain, 19 complex, 47 lattice" in said
    assert len(path.read_text().splitlines()) == 1 + 564


def test_quiet_says_nothing_and_a_pipe_stays_clean(tmp_path):
    environment = dict(os.environ, PYTHONPATH=str(COORDINATES.parent.parent))
    call = [sys.executable, "-m", "structmap.cli", "contacts", str(COORDINATES), "-o"]
    path = str(tmp_path / "contacts.csv")
    loud = subprocess.run(
        [*call, path], capture_output=True, check=True, env=environment
    )
    assert loud.stderr == b""
    quiet = subprocess.run(
        [*call, path, "--quiet"], capture_output=True, check=True, env=environment
    )
    assert quiet.stdout == b"" == quiet.stderr


def test_the_list_of_contacts_waits_for_no_statistics():
    code = (
        "import sys\nimport structmap.contact_list\n"
        "heavy = ('pandas', 'scipy.stats', 'sklearn', 'scipy.optimize')\n"
        "print('loaded:', [name for name in heavy if name in sys.modules])\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True
    )
    assert "loaded: []" in done.stdout
