"""What is looked at beside the units: choices, the other part, a second opinion."""

import json
import subprocess
import sys
import tomllib
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.sparse import csr_array
from sklearn.cluster import AgglomerativeClustering
from sklearn.metrics import adjusted_rand_score, calinski_harabasz_score

import structmap
from structmap.analysis.beside import _graph_by_ca
from structmap.analysis.evidence import Surroundings
from structmap.contacts import CHAIN
from structmap.motional_units import find_motional_units
from structmap.motional_units.agreement import adjusted_rand_index
from structmap.motional_units.choices import (
    _group_with,
    vary_contacts,
    vary_thresholds,
)
from structmap.motional_units.other_part import look_at_other_part
from structmap.motional_units.second_opinion import (
    MOST_GROUPS,
    _cut,
    ask_second_opinion,
)
from structmap.settings import make_settings
from structmap.tables import run_text
from structmap.words import care_sentences, rests_on
from tests.test_motional_units import measurements, quiet_with_unit, ring_of_sites

EXAMPLES = Path(__file__).parent.parent / "examples"
HINGE = "N1944 E1945 D1946 D1947 S1948 I1950"


def example(**settings):
    given_settings = tomllib.loads((EXAMPLES / "settings.toml").read_text())
    return structmap.analyse(
        EXAMPLES / "4cup.cif.gz",
        EXAMPLES / "invented_values.csv",
        make_settings({**given_settings, "most_permutations": 0, **settings}),
    ).record


@pytest.fixture(scope="module")
def by_shape():
    return example(second_opinion=True)


@pytest.fixture(scope="module")
def by_level():
    return example(profile_part="level")


# --- adjusted Rand index --------------------------------------------------------------


@given(
    st.integers(1, 40).flatmap(
        lambda n: st.tuples(
            st.lists(st.integers(-1, 4), min_size=n, max_size=n),
            st.lists(st.integers(-1, 4), min_size=n, max_size=n),
        )
    )
)
def test_rand_index_agrees_with_scikit_learn(pair):
    one, other = np.array(pair[0]), np.array(pair[1])
    assert adjusted_rand_index(one, other) == pytest.approx(
        adjusted_rand_score(one, other), abs=1e-12
    )


def test_rand_index_of_a_worked_table():
    # Counts 2, 1 / 0, 3: sums of pairs 4, of rows 6, of columns 7, of all 15.
    one, other = np.array([0, 0, 0, 1, 1, 1]), np.array([0, 0, 1, 1, 1, 1])
    expected = (4 - 6 * 7 / 15) / ((6 + 7) / 2 - 6 * 7 / 15)
    assert adjusted_rand_index(one, other) == pytest.approx(expected)


# --- choices --------------------------------------------------------------------------


def found_on_ring():
    graph, centres = ring_of_sites(120)
    value = quiet_with_unit()
    data = measurements(value, error=np.ones_like(value))
    return find_motional_units(data, graph, centres), data, graph, centres


def test_the_same_contacts_and_limits_give_the_same_units():
    search, _, graph, _ = found_on_ring()
    assert search.members
    (same,) = vary_contacts(search, {"the same": graph})
    assert (same.n_units, same.agreement) == (len(search.members), 1.0)
    assert same.n_sites == (search.label >= 0).sum()
    assert adjusted_rand_index(_group_with(search, 1.0), search.label) == 1.0


def test_limits_beyond_every_deviation_leave_no_unit():
    search, *_ = found_on_ring()
    assert (_group_with(search, 100.0) < 0).all()


def test_lower_and_higher_limits_are_both_shown():
    lower, higher = vary_thresholds(found_on_ring()[0])
    assert lower.choice == "all limits 20\u00a0% lower"
    assert higher.choice == "all limits 25\u00a0% higher"
    assert lower.n_sites >= higher.n_sites


def test_cutoffs_and_distance_kinds_stand_in_page_and_run_record(by_shape):
    run = json.loads(run_text(by_shape))
    assert [one["choice"] for one in run["choices"]] == [
        "heavy atoms within 4 Å",
        "heavy atoms within 5 Å",
        "heavy atoms within 6 Å",
        "CA atoms within 7.5 Å",
        "all limits 20 % lower",
        "all limits 25 % higher",
    ]
    (paragraph,) = (p for p in rests_on(by_shape) if p.startswith("Choices"))
    assert all(one.choice in paragraph for one in by_shape.beside.choices)


def test_contacts_between_ca_atoms_are_those_of_a_plain_distance_matrix(by_shape):
    graph = _graph_by_ca(
        Surroundings(
            structure=by_shape.structure,
            sites=by_shape.sites,
            contacts=by_shape.contacts,
            graph=by_shape.graph,
            assemblies=(),
        ),
        7.5,
    )
    structure, sites = by_shape.structure, by_shape.sites
    ca = np.array(
        [
            structure.position[
                (structure.residue_of_atom == residue) & (structure.atom_name == "CA")
            ][0]
            for residue in sites.residue
        ]
    )
    apart = np.linalg.norm(ca[:, None] - ca[None], axis=-1)
    expected = {(i, j) for i, j in np.argwhere(apart <= 7.5).tolist() if i < j}
    inside = graph.kind == CHAIN
    found = set(
        zip(graph.site_1[inside].tolist(), graph.site_2[inside].tolist(), strict=True)
    )
    assert found == expected


# --- the other part -------------------------------------------------------------------


def test_the_raised_level_of_the_planted_hinge_is_named(by_shape):
    other = by_shape.beside.other_part
    assert other.part == "level"
    assert other.raised == (True,)
    (said,) = (s for s in care_sentences(by_shape) if "raised level" in s)
    assert said.startswith(f"Six residues ({HINGE}) have a raised level without disp")
    assert "outside the window of this experiment, which is not rest" in said


def test_dispersion_without_a_raised_level_is_named_when_levels_are_grouped(by_level):
    other = by_level.beside.other_part
    assert other.part == "shape"
    members = {
        int(by_level.sites.name[site].split("/")[1])
        for group in other.groups
        for site in group
    }
    # Of the unit planted across the crystal contact the dispersion is plain and the
    # levels are within their scatter.
    assert {1916, 1919, 1920, 1922, 1955, 1956, 1959, 1960} <= members
    assert any("another shape" in sentence for sentence in care_sentences(by_level))


def test_values_that_are_no_profiles_have_no_other_part():
    search, data, graph, centres = found_on_ring()
    with pytest.raises(ValueError, match=r"^other is not of the sites"):
        look_at_other_part(
            search, measurements(quiet_with_unit(40)), graph, centres=centres
        )
    assert example(profile_part="whole").beside.other_part is None
    assert len(data.site) == 120


# --- second opinion -------------------------------------------------------------------


def test_second_opinion_takes_the_number_of_groups_with_the_largest_index():
    search, *_ = found_on_ring()
    opinion = ask_second_opinion(search)
    values = search.field.value / np.sqrt(search.field.variance)[:, None]
    links, ends = search.links, (search.links.first, search.links.second)
    touching = csr_array((np.ones(len(ends[0])), ends), shape=(links.n_rows,) * 2)
    touching = touching + touching.T
    scores = {}
    for n_groups in range(2, MOST_GROUPS + 1):
        model = AgglomerativeClustering(n_groups, connectivity=touching)
        scores[n_groups] = calinski_harabasz_score(values, model.fit_predict(values))
    assert opinion.n_groups == max(scores, key=scores.get)
    assert opinion.criterion == pytest.approx(max(scores.values()))
    best = AgglomerativeClustering(opinion.n_groups, connectivity=touching)
    assert opinion.agreement == pytest.approx(
        adjusted_rand_score(search.label, best.fit_predict(values))
    )


def test_a_tree_is_cut_where_merges_end():
    # Rows 0 and 1 merge first (node 4), then 2 and 3 (node 5), then both.
    merges = np.array([[0, 1], [2, 3], [4, 5]])
    assert _cut(merges, 4, 2).tolist() == [0, 0, 1, 1]
    assert len(set(_cut(merges, 4, 3).tolist())) == 3


def test_second_opinion_is_told_in_one_sentence_with_its_criterion(by_shape):
    (said,) = (p for p in rests_on(by_shape) if p.startswith("Second opinion"))
    assert "Calinski-Harabasz" in said
    assert f"{by_shape.beside.second_opinion.agreement:.2f}" in said
    run = json.loads(run_text(by_shape))
    assert run["second_opinion"]["n_groups"] == by_shape.beside.second_opinion.n_groups


def test_scikit_learn_is_imported_only_for_a_second_opinion(tmp_path):
    code = (
        "import sys; from structmap.cli import main; "
        "main(['example', '-o', sys.argv[1], '--quiet']); "
        "print('sklearn' in sys.modules)"
    )
    ran = subprocess.run(
        [sys.executable, "-c", code, str(tmp_path / "out")],
        capture_output=True,
        text=True,
        check=True,
    )
    assert ran.stdout.strip() == "False"


def test_without_a_second_opinion_none_is_told(by_level):
    assert by_level.beside.second_opinion is None
    assert json.loads(run_text(by_level))["second_opinion"] is None
    assert not [p for p in rests_on(by_level) if p.startswith("Second opinion")]
