"""Written answers to problems with a known truth, scored by an outside judge."""

import importlib.util
import sys
from pathlib import Path

import pytest

from structmap.cli import main

COORDINATES = Path(__file__).parent.parent / "examples" / "4cup.cif.gz"


def load(folder, name):
    spec = importlib.util.spec_from_file_location(name, folder / f"{name}.py")
    module = importlib.util.module_from_spec(spec)
    sys.modules[name] = module
    spec.loader.exec_module(module)
    return module


@pytest.fixture(scope="module")
def judge(planted_folder):
    return load(planted_folder, "planted"), load(planted_folder, "score")


def answered(judge, folder, seeds, **plan):
    """Plant problems, let the command answer them, return the judge's scores."""
    planted, score = judge
    graph = planted.SiteGraph(str(COORDINATES))
    scores = []
    for seed in seeds:
        problem = folder / str(seed)
        planted.write(graph, planted.plant(graph, seed=seed, **plan), problem)
        call = ["analyse", str(COORDINATES), str(problem / "values.csv"), "--quiet"]
        call += ["-o", str(problem / "out"), "--repeats", "20"]
        assert main([*call, "--most-permutations", "199"]) == 0
        scores.append(score.problem_score(problem))
    return scores


@pytest.mark.parametrize("k", [1, 10])
def test_planted_units_are_found_and_lie_inside_the_molecule(judge, tmp_path, k):
    # Over 24 problems the index is 0.97 at this size of effect, with a spread of 0.05.
    found = answered(judge, tmp_path, range(20, 23), k=k, effect=8.0, units=3)
    assert sum(one["ari"] for one in found) / len(found) > 0.85
    assert sum(one["matched"] for one in found) >= 6
    assert sum(one["internal"] for one in found) >= 5
    assert not any(one["false_supported"] for one in found)


def test_units_planted_across_the_crystal_are_called_so(judge, tmp_path):
    found = answered(
        judge, tmp_path, range(20, 23), k=10, effect=8.0, units=2, mode="lattice"
    )
    matched = sum(one["matched"] for one in found)
    assert matched >= 4
    assert sum(one["lattice_right"] for one in found) >= matched - 1


def test_a_molecule_without_units_is_said_to_have_none(judge, tmp_path):
    found = answered(judge, tmp_path, range(20, 24), k=10, effect=5.0, units=0, bg=1)
    assert sum(one["found"] > 0 for one in found) <= 1
    assert not any(one["any_supported"] for one in found)
