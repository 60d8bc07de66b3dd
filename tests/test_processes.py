"""One process in a whole analysis: the circle, its remedies, the whole molecule."""

import json
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from structmap import words
from structmap.analysis.compute import analyse_table
from structmap.analysis.processes import (
    find_clustered_sets,
    like_group,
    prepare_by_settings,
    profile_of_row,
)
from structmap.analysis.steps import kept_points_note, match_by_settings, point_reasons
from structmap.behaviour import take_measurements
from structmap.cli import main
from structmap.contacts import (
    SiteGraph,
    choose_assemblies,
    find_contacts,
    make_site_graph,
)
from structmap.motional_units import find_motional_units
from structmap.one_process import (
    Conditions,
    Reference,
    describe_whole,
    find_flat_sites,
    fit_group,
    prepare_profiles,
    whole_words,
)
from structmap.one_process.reference import find_reference_p
from structmap.settings import Settings
from structmap.sites import Sites, site_centres
from structmap.structure import read_structure
from structmap.tables import run_text
from structmap.values import Quantity, read_values

EXAMPLES = Path(__file__).parent.parent / "examples"
COORDINATES = EXAMPLES / "4cup.cif.gz"
TIMES = np.array([0.1, 0.3, 0.6, 1, 1.5, 2, 2.5, 3, 3.5, 4, 5, 6])
OFFSET = 1855  # of the coordinates against the table
LOOP = set(range(1890, 1902)) - {1892, 1899}
DECAY = Settings(model="exponential", most_permutations=0)


@pytest.fixture(scope="module")
def measured():
    return read_values([EXAMPLES / "invented_values.csv"])


def decays(rates, amplitudes, rng, *, error=0.03):
    curves = 1 + amplitudes[:, None] * np.exp(-rates[:, None] * TIMES)
    value = curves + error * rng.standard_normal(curves.shape)
    return Quantity(
        name="I",
        unit="",
        x=TIMES,
        x_name="time",
        x_unit="s",
        value=value,
        error=np.full(value.shape, error),
        has_errors=True,
    )


def single(value, *, name="B", error=0.5):
    column = np.asarray(value, dtype=float)[:, None]
    return Quantity(
        name=name,
        unit="",
        x=np.empty(0),
        x_name="",
        x_unit="",
        value=column,
        error=np.full(column.shape, error),
        has_errors=True,
    )


# --- the circle -----------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False, kw_only=True)
class Ground:
    """The measured sites of the example on its structure."""

    sites: Sites
    graph: SiteGraph
    centres: NDArray[np.float64]


def lay_ground(measured):
    structure = read_structure(COORDINATES)
    sites = match_by_settings(structure, measured, DECAY)
    contacts = find_contacts(
        structure,
        reach_angstrom=4.5,
        assemblies=choose_assemblies(structure, "auto"),
    )
    graph = make_site_graph(contacts, sites, cutoff_angstrom=4.5)
    return Ground(sites=sites, graph=graph, centres=site_centres(structure, sites))


def reference_chances(measured, ground, *, seed):
    """Return p of each unit against clustered and random groups; no common process."""
    rng = np.random.default_rng(seed)
    n_rows = len(measured.line)
    rates = 0.7 * 2 ** rng.standard_normal(n_rows)
    amplitudes = (rng.random(n_rows) < 0.6).astype(float)
    table = replace(measured, quantities=(decays(rates, amplitudes, rng),))
    measurements = take_measurements(table, ground.sites, model_name="exponential")
    search = find_motional_units(measurements, ground.graph, ground.centres)
    prepared = prepare_by_settings(table, DECAY)
    place = profile_of_row(prepared, ground.sites, search)
    picked = find_clustered_sets(search, place, prepared, rng=rng, n_orders=100)
    informative = ~find_flat_sites(prepared.profiles)
    for rows in search.member_rows:
        group = place[rows][informative[place[rows]]]
        if len(group) < 4:
            continue
        own = prepared.profiles.take(group)
        fit = fit_group(own.x, own.value, own.error, prepared.model)
        outside = ~np.isin(np.arange(len(prepared.profiles.name)), group)
        others = Reference(profiles=prepared.profiles.take(outside))
        yield (
            find_reference_p(
                fit, like_group(picked, group, prepared), n_sets=0, rng=rng
            ),
            find_reference_p(fit, others, n_sets=299, rng=rng),
        )


def test_units_picked_for_likeness_pass_unless_compared_with_such_units(measured):
    ground = lay_ground(measured)
    found = [reference_chances(measured, ground, seed=seed) for seed in range(14)]
    clustered, random = np.array([pair for each in found for pair in each]).T
    assert np.isfinite(clustered).sum() >= 15
    # Over 60 seeds 60 % of such units look rarer than 1 in 20 beside random groups,
    # 6 % beside groups that the same search finds on permuted sites.
    assert np.nanmean(random <= 0.05) > 0.35
    assert np.nanmean(clustered <= 0.05) < 0.25


def one_rate_in_the_loop(measured, *, seed=2):
    """Return values whose loop shares a rate, and a single number that finds it."""
    rng = np.random.default_rng(seed)
    inside = np.isin(measured.auth_seq_id + OFFSET, list(LOOP))
    rates = np.where(inside, 0.7, 0.7 * 2 ** rng.standard_normal(len(inside)))
    flexible = np.where(inside, 30.0, 15.0) + 0.5 * rng.standard_normal(len(inside))
    amplitudes = np.where(inside, 1.0, 0.8)
    return replace(
        measured, quantities=(single(flexible), decays(rates, amplitudes, rng))
    )


def test_units_formed_on_another_quantity_are_confirmed(measured):
    table = one_rate_in_the_loop(measured)
    apart = replace(DECAY, quantity=("B",), process_quantity="I")
    record = analyse_table(COORDINATES, table, apart)
    unit = record.units[0]
    process = record.process_of(unit)
    assert (process.verdict, process.descriptive) == ("shared", False)
    assert process.low < 0.7 < process.high
    assert not any(
        "describes only" in line for line in words.unit_process(record, unit)
    )
    assert not any("confirms nothing" in text for text in words.rests_on(record))


def test_the_circle_is_told_where_one_quantity_does_both(measured):
    record = analyse_table(
        COORDINATES,
        one_rate_in_the_loop(measured),
        replace(DECAY, quantity=("I",), reference="clustered"),
    )
    process = record.process_of(record.units[0])
    assert process.descriptive
    assert any("permuted sites" in note for note in process.notes)
    said = words.unit_process(record, record.units[0])
    assert said[-1] == "describes only: the unit was formed on these profiles"
    paragraph = words.rests_on(record)[-1]
    assert "confirms nothing" in paragraph
    assert "process_quantity" in paragraph
    # Outside the loop every residue has a rate of its own.
    assert "so it is not one unit" in paragraph


# --- the whole molecule ---------------------------------------------------------------


def whole_of(measured, rates, *, seed=2):
    rng = np.random.default_rng(seed)
    quantity = decays(rates, np.ones(len(rates)), rng)
    prepared = prepare_profiles(
        replace(measured, quantities=(quantity,)),
        "exponential",
        conditions=Conditions(),
    )
    return describe_whole(prepared, rng=np.random.default_rng(3))


def test_a_cooperative_molecule_has_one_value(measured):
    whole = whole_of(measured, np.full(len(measured.line), 0.7))
    (sentence,) = whole_words(whole)
    assert len(whole.fits) == 1
    assert whole.fits[0].low < 0.7 < whole.fits[0].high
    assert "one cooperative unit" in sentence


def test_two_rates_are_found_with_their_members(measured):
    inside = np.isin(measured.auth_seq_id + OFFSET, list(LOOP))
    whole = whole_of(measured, np.where(inside, 2.0, 0.7))
    assert [
        fit.low < rate < fit.high
        for fit, rate in zip(whole.fits, (0.7, 2.0), strict=True)
    ] == [True, True]
    members = {int(name.split("/")[-1]) for name in whole.fits[1].profiles.name}
    assert members == {number - OFFSET for number in LOOP}
    assert "so it is not one unit" in whole_words(whole)[0]


def written(path, rates, *, seed=5, points=TIMES):
    rng = np.random.default_rng(seed)
    lines = ["auth_seq_id,x [s],value,error"]
    for number, rate in enumerate(rates, 1):
        for time in points:
            value = 1 + np.exp(-rate * time) + 0.03 * rng.standard_normal()
            lines.append(f"{number},{time},{value:.5f},0.03")
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path


def test_the_command_tells_how_many_values_and_who_follows(tmp_path, capsys):
    path = written(tmp_path / "decay.csv", [0.5] * 8 + [2.5] * 4)
    out = tmp_path / "out.csv"
    assert (
        main(["one-process", str(path), "--model", "exponential", "-o", str(out)]) == 0
    )
    said = capsys.readouterr().out
    assert "One value explains all but 9, 10, 11, 12" in said
    assert "2 values of k predict points held out best" in said
    rows = [line.split(",") for line in out.read_text().splitlines()]
    assert [row[0] for row in rows[1:]] == ["all", "all: value 1", "all: value 2"]
    assert rows[3][-1] == "9 10 11 12"
    assert float(rows[2][5]) == pytest.approx(0.5, rel=0.1)


# --- points put back ------------------------------------------------------------------


def test_points_are_put_back_and_then_count_with_caution(measured):
    profile = measured.quantities[0]
    spinning = Settings(
        model="mas-r1rho", mas_rate_hertz=40e3, proton_frequency_megahertz=600.0
    )
    usual = prepare_by_settings(measured, spinning)
    kept = prepare_by_settings(measured, replace(spinning, keep_points=True))
    assert len(usual.profiles.x) < len(profile.x) == len(kept.profiles.x)
    assert kept.left_out == ()
    assert kept.caution.sum() >= len(profile.x) - len(usual.profiles.x)


def test_points_put_back_are_told_to_the_reader(measured):
    spinning = Settings(
        model="mas-r1rho", mas_rate_hertz=40e3, proton_frequency_megahertz=600.0
    )
    assert kept_points_note(measured, spinning) == ()
    (sentence,) = kept_points_note(measured, replace(spinning, keep_points=True))
    assert "within 3 kHz of the spinning rate" in sentence
    assert sentence.endswith("what they show need not be motion.")


# --- direction ------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "settings", "low"),
    [
        ("S2", {}, True),
        ("S2_600MHz", {}, True),
        ("order parameter", {}, True),
        ("hetNOE", {}, True),
        ("NOE_800", {}, True),
        ("protection_factor", {}, True),
        ("R2", {}, False),
        ("NOESY", {}, False),
        ("S2N", {}, False),
        ("occupancy", {"low_moves": ("occupancy",)}, True),
    ],
)
def test_quantities_that_are_low_where_something_moves(measured, name, settings, low):
    rng = np.random.default_rng(5)
    inside = np.isin(measured.auth_seq_id + OFFSET, list(LOOP))
    value = np.where(inside, 0.55, 0.85) + 0.01 * rng.standard_normal(len(inside))
    table = replace(measured, quantities=(single(value, name=name, error=0.01),))
    chosen = Settings(most_permutations=0, **settings)
    record = analyse_table(COORDINATES, table, chosen)
    assert words.low_quantities(record) == ((name,) if low else ())
    sentence = words.unit_sentence(record, record.units[0])
    assert (f"{name} lower than the baseline: moves more" in sentence) is low
    shown = dict(words.facts(record))["Values"]
    assert (f"low means moving: {name}" in shown) is low
    assert ("a low value means motion" in " ".join(words.rests_on(record))) is low
    told = json.loads(run_text(record))["low_means_moving"]
    assert told == ([name] if low else [])


def test_a_high_order_parameter_is_not_called_motion(measured):
    inside = np.isin(measured.auth_seq_id + OFFSET, list(LOOP))
    rng = np.random.default_rng(5)
    value = np.where(inside, 0.95, 0.65) + 0.01 * rng.standard_normal(len(inside))
    table = replace(measured, quantities=(single(value, name="S2", error=0.01),))
    record = analyse_table(COORDINATES, table, Settings(most_permutations=0))
    sentence = words.unit_sentence(record, record.units[0])
    assert "S2 higher than the baseline: moves less" in sentence


# --- conditions of the experiment -----------------------------------------------------


def spin_lock_settings(**more):
    return Settings(
        model="mas-r1rho",
        mas_rate_hertz=60e3,
        proton_frequency_megahertz=600.0,
        **more,
    )


def test_settings_of_the_experiment_decide_which_points_stay(measured):
    def lowest(**more):
        return prepare_by_settings(
            measured, spin_lock_settings(**more)
        ).profiles.x.min()

    assert lowest() == 11e3  # protonated: below 10 kHz coherent loss
    assert lowest(sample="deuterated") == 5e3
    assert lowest(lowest_field_hertz=20e3) == 20e3

    usual = prepare_by_settings(measured, spin_lock_settings())
    wide = prepare_by_settings(measured, spin_lock_settings(largest_offset_hertz=3e3))
    near = usual.profiles.x < 15e3  # five times the largest offset
    assert not usual.caution[near].any()
    assert wide.caution[near].all()


def test_both_steps_leave_the_same_points_out(measured):
    chosen = replace(
        spin_lock_settings(nucleus="1H", lowest_field_hertz=9e3), mas_rate_hertz=52e3
    )
    reasons = point_reasons(measured, chosen)
    prepared = prepare_by_settings(measured, chosen)
    kept = measured.quantities[0].x[[not reason for reason in reasons]]
    np.testing.assert_allclose(prepared.profiles.x, 1e3 * kept)
    assert any("half the spinning rate" in reason for reason in reasons)


def test_protein_depletes_the_ligand(tmp_path):
    # One site, Kd 20 uM, 100 uM protein: most of the ligand is bound at first.
    protein, kd = 100e-6, 20e-6
    ligand = 1e-6 * np.array([0, 25, 50, 100, 150, 200, 300, 400])
    total = ligand + protein + kd
    bound = (total - np.sqrt(total**2 - 4 * ligand * protein)) / (2 * protein)
    rng = np.random.default_rng(9)
    lines = ["auth_seq_id,x [uM],value [ppm],error"]
    for site in range(1, 6):
        for place, share in zip(ligand * 1e6, bound, strict=True):
            value = 0.1 * site * share + 0.004 * rng.standard_normal()
            lines.append(f"{site},{place:g},{value:.5f},0.004")
    path, out = tmp_path / "titration.csv", tmp_path / "out.csv"
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    call = ["one-process", str(path), "--model", "binding", "-o", str(out)]
    assert main([*call, "--protein-molar", "1e-4"]) == 0
    row = dict(
        zip(
            *(line.split(",") for line in out.read_text().splitlines()[:2]), strict=True
        )
    )
    assert float(row["low"]) < kd < float(row["high"])
    assert main(call) == 0  # without depletion the constant comes out too large
    row = dict(
        zip(
            *(line.split(",") for line in out.read_text().splitlines()[:2]), strict=True
        )
    )
    assert float(row["low"]) > kd
