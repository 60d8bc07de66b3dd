"""The model that DEVELOPERS.md writes in ten lines, and what README tells of models."""

import re

import numpy as np
import pytest

from structmap.experiment import Experiment
from structmap.one_process import MODELS, Conditions, make_model


def test_the_ten_lines_fit_and_judge(repository):
    text = (repository / "DEVELOPERS.md").read_text(encoding="utf-8")
    (code,) = re.findall(r"```python\n(.*?)```", text, flags=re.DOTALL)
    assert "stretched" in code
    rng = np.random.default_rng(7)
    time, rate = np.geomspace(0.05, 40, 14), 0.6
    levels, heights = rng.uniform(0.5, 2, (2, 7, 1))
    curve = levels + heights * np.exp(-np.sqrt(rate * time))
    known = {
        "time": time,
        "signal": curve + 0.01 * rng.standard_normal(curve.shape),
        "error": np.full(curve.shape, 0.01),
    }
    exec(compile(code, "DEVELOPERS.md", "exec"), known)
    fit, verdict = known["fit"], known["verdict"]
    assert fit.low < rate < fit.high
    assert fit.high / fit.low < 1.2
    assert (verdict.verdict, verdict.parameter, verdict.unit) == ("shared", "k", "s-1")
    assert verdict.model == "stretched"


@pytest.mark.parametrize("name", MODELS)
def test_readme_tells_x_parameter_and_unit_of_each_model(repository, name):
    experiment = Experiment(mas_rate_hertz=6e4, proton_frequency_megahertz=600.0)
    model = make_model(
        name,
        Conditions(
            experiment=experiment,
            observables=("R1", "R2"),
            fields_megahertz=(600.0, 600.0),
        ),
    )
    text = (repository / "README.md").read_text(encoding="utf-8")
    (row,) = re.findall(rf"^\| `{name}`: .*\|$", text, flags=re.MULTILINE)
    _, x, shared, own, _ = (cell.strip() for cell in row.strip("|").split("|"))
    assert x == model.x_unit
    assert shared.startswith(f"`{model.shared.name}` ({model.shared.unit})")
    assert (model.companion is None) or f"`{model.companion.name}`" in shared
    assert (model.local is None) or own == f"{model.local.name} ({model.local.unit})"
