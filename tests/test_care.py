"""What the reader is told before using a result, and in which order."""

import re
from pathlib import Path

import numpy as np
import pytest

import structmap
from structmap.cli import main
from structmap.settings import Settings
from structmap.words import care_sentences

DATA = Path(__file__).parent / "data"
QUICK = {"most_permutations": 0}


def write_values(path, *, n_sites=52, shift=0, error="1.0", scale=1.0):
    """Write invented values on the first residues of 1ORC, which starts at 3."""
    names = "QRITLKDYAMRFGQTKTAKDLGVYQSAINKAIHAGRKIFLTINADGSVYAEEVKPFPSNKKTTA"
    rng = np.random.default_rng(5)
    lines = ["residue,auth_comp_id,R2,R2_error"]
    for k in range(n_sites):
        value = 10 + scale * rng.normal()
        lines.append(f"{k + 3 + shift},{names[k]},{value:.4f},{error}")
    path.write_text("\n".join(lines) + "\n")
    return path


def told(tmp_path, *, settings=None, **how):
    path = write_values(tmp_path / "values.csv", **how)
    found = structmap.analyse(
        DATA / "1orc.pdb", path, Settings(**(settings or {}), **QUICK)
    )
    return care_sentences(found.record)


def place(sentences, words):
    found = [k for k, sentence in enumerate(sentences) if words in sentence]
    assert len(found) == 1, (words, sentences)
    return found[0]


def test_sentences_stand_in_the_order_of_their_weight(tmp_path):
    sentences = told(tmp_path, shift=-2, n_sites=45, scale=4.0)
    order = ["offset +2", "errors are stated too small", "statement about the crystal"]
    order += ["not measured", "Only 45 sites"]
    places = [place(sentences, words) for words in order]
    assert places == sorted(places)


def test_missing_errors_are_told_once_and_first(tmp_path):
    sentences = told(tmp_path, error="")
    assert place(sentences, "errors") == 0
    assert "one common error of" in sentences[0]
    # The values scatter with a standard deviation of 1.
    size = float(re.search(r"error of ([0-9.]+)", sentences[0])[1])
    assert size == pytest.approx(1.0, abs=0.4)


def test_errors_too_small_are_told_without_any_test_of_chance(tmp_path):
    assert any("stated too small" in s for s in told(tmp_path, error="0.2"))


def test_no_sentence_stands_twice(tmp_path):
    sentences = told(tmp_path, error="0", shift=1)
    assert len(set(sentences)) == len(sentences)


def test_remedies_name_options_that_exist(tmp_path, capsys):
    with pytest.raises(SystemExit, match="0"):
        main(["analyse", "--help"])
    known = set(re.findall(r"--[a-z-]+", capsys.readouterr().out))
    sentences = told(tmp_path, error="0.2")
    named = {o for s in sentences for o in re.findall(r"--[a-z-]+", s)}
    assert "--baseline" in named
    assert named <= known
