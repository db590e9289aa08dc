"""layout noise as a user meets it, and the lines that it writes for a brief."""

import csv
import io
import json
import tomllib

import numpy as np
import pytest
from click.testing import CliRunner
from recorded import NAMES, covariance_of, noise_parts, white_recording, write_signals
from studies import BAND, SPHERE, TWO_REGIONS, coils, cups

from layout.brief.parse import load_brief
from layout.cli import cli
from layout.design import build_problem, lay_out_study
from layout.design.noise_fit import fit_noise
from layout.design.problem import patches
from layout.noise.background import background_columns
from layout.outputs.noise_tables import FILES, noise_csv, noise_json
from layout.physics.channels import Channels, electrodes_at, joined
from layout.units import FT, UV

PLANTED = {"contacts": 1.5, "background": 1.2, "eyes": 0.5}
ZONES = "contact_noise_in_uv = { forehead = 0.5 }\n"
TABLES = ('schema = 1\ntitle = "Rest"\n', SPHERE, TWO_REGIONS, cups(4, 'family = "10-20"', ZONES))
COILS = coils(3, "grid_mm = 40")


def write_brief(folder, *tables, band=BAND):
    path = folder / "study.toml"
    path.write_text("\n".join([*TABLES, *tables, band]))
    return path


def save(path, covariance, names=NAMES, unit="V", **arrays):
    np.savez(path, covariance=covariance, names=np.array(names), unit=np.array(unit), seconds=120.0, **arrays)
    return path


def run(*words):
    return CliRunner().invoke(cli, ["noise", *map(str, words)])


@pytest.fixture(scope="module")
def rest(tmp_path_factory):
    """An EDF file of 60 s with the planted strengths; contacts alike everywhere."""
    signals = white_recording(covariance_of(**PLANTED), (1.0, 40.0), 60, 128, np.random.default_rng(0))
    return write_signals(tmp_path_factory.mktemp("rest") / "rest.edf", NAMES, signals, 128, largest=500.0)


def test_tables_files_and_json_agree(tmp_path, rest):
    brief = write_brief(tmp_path, COILS)
    brief.write_text(brief.read_text().replace(ZONES, ""))
    answer = run(brief, "--recording", rest, "--out", tmp_path / "out")
    assert answer.exit_code == 0, answer.output
    assert max(len(line) for line in answer.output.splitlines() if "Written to" not in line) <= 80
    flat = " ".join(answer.output.split())
    for words in (
        "19 electrodes, 60 s in 1-40 Hz, worth",
        "says nothing of magnetometers' own noise",
        "kept, not recorded",
    ):
        assert words in flat
    assert {one.name for one in (tmp_path / "out").iterdir()} == {*FILES, "made-by.json"}
    content = json.loads((tmp_path / "out" / "noise.json").read_text())
    rows = list(csv.DictReader(io.StringIO((tmp_path / "out" / "noise.csv").read_text())))
    assert list(json.loads((tmp_path / "out" / "columns.json").read_text())["noise.csv"]) == list(rows[0])
    for row, one in zip(rows, content["strengths"], strict=True):
        assert (row["strength"], row["status"]) == (one["what"], one["status"])
        assert float(row["value"]) == pytest.approx(one["value"], rel=1e-5)
    by_key = {one["key"]: one for one in content["strengths"] if one["key"]}
    planted = {"stock.contact_noise_uv": 1.5, "noise.background.eeg_uv_rms": 9.0, "noise.eyes.uv_rms": 10.0}
    for key, value in planted.items():
        assert by_key[key]["low"] < value < by_key[key]["high"]
        assert by_key[key]["status"] == "fitted"
    assert by_key["noise.eyes.uv_rms"]["assumption"] == "above"
    assert by_key["stock.noise_ft_per_rthz"]["status"] == "not recorded"
    assert content["samples_if_flat"] == 2 * 39 * 60
    before = {one.name: one.read_bytes() for one in (tmp_path / "out").iterdir()}
    again = run(brief, "--recording", rest, "--out", tmp_path / "out", "--json")
    assert json.loads(again.output) == content
    assert {one.name: one.read_bytes() for one in (tmp_path / "out").iterdir()} == before


def test_the_lines_give_a_brief_the_same_noise_without_the_recording(tmp_path):
    own = np.where(np.isin(NAMES, ["Fp1", "Fp2"]), 0.5, 1.0) * UV
    save(tmp_path / "rest.npz", covariance_of(background=1.2, eyes=0.5) + np.diag((1.5 * own) ** 2))
    brief = load_brief(write_brief(tmp_path, COILS, band=BAND + '[noise.recording]\nfile = "rest.npz"\n'))
    fit = fit_noise(brief)
    assert "2 x bandwidth x seconds, which holds for a flat spectrum" in fit.notes[0]
    said = tomllib.loads(fit.lines)
    assert said["contact_noise_uv"] == pytest.approx(1.5, rel=1e-5)
    stock, tables = fit.lines.split("[noise.background]")
    text = write_brief(tmp_path, COILS, band=BAND + "[noise.background]" + tables).read_text()
    text = text.replace("contact_noise_uv = 1\n" + ZONES, stock)
    (tmp_path / "study.toml").write_text(text)
    stated = build_problem(lay_out_study(load_brief(tmp_path / "study.toml")))
    recorded = build_problem(lay_out_study(brief))
    np.testing.assert_allclose(stated.sensor_sd, recorded.sensor_sd, rtol=2e-6)
    np.testing.assert_allclose(stated.model.nuisance, recorded.model.nuisance, rtol=1e-4, atol=1e-6)


def test_magnetometers_tell_of_their_own_noise_and_of_the_surroundings(tmp_path):
    """Both kinds on one head, planted: coils of 20 fT/rtHz, 300 fT of field from outside, none of it assumed."""
    study = lay_out_study(load_brief(write_brief(tmp_path, COILS)))
    points = np.array([study.standard[name] for name in NAMES])
    out = points / np.linalg.norm(points, axis=1)[:, None]
    n = len(NAMES)
    channels = joined(electrodes_at(points), Channels(points + 0.012 * out, out, np.zeros(n, dtype=bool), out))
    density = 1.2 * noise_parts()[1].density
    brain = density * background_columns(channels, study.cortex, patches(study), study.head.cortex.areas)
    field = 300 * FT * channels.axes
    own = np.repeat([(1.5 * UV) ** 2, (20 * FT) ** 2 * 39], n)
    path = save(
        tmp_path / "both.npz",
        brain @ brain.T + field @ field.T + np.diag(own),
        (*NAMES, *(f"M{i}" for i in range(n))),
        ["V"] * n + ["T"] * n,
        positions_mm=1e3 * channels.positions,
        axes=channels.axes,
    )
    quiet = write_brief(tmp_path, COILS, band=BAND + "[noise.eyes]\nuv_rms = 0\n")
    quiet.write_text(quiet.read_text().replace(ZONES, ""))
    fit = fit_noise(load_brief(quiet), path)
    by_key = {one.key: one for one in fit.strengths}
    assert by_key["stock.noise_ft_per_rthz"].value == pytest.approx(20, rel=1e-3)
    assert by_key["noise.surroundings.field_ft_rms"].value == pytest.approx(300, rel=1e-3)
    assert by_key["noise.surroundings.field_ft_rms"].assumption == "below"
    assert by_key["noise.surroundings.gradient_ft_per_cm_rms"].status == "assumed"
    assert "noise.eyes.uv_rms" not in by_key
    said = tomllib.loads(fit.lines)
    assert said["noise_ft_per_rthz"] == pytest.approx(20, rel=1e-3)
    assert said["noise"]["surroundings"] == {"field_ft_rms": pytest.approx(300, rel=1e-3)}
    assert "nan" not in noise_csv(fit).lower() + noise_json(fit).lower()


def test_hostile_words_get_one_sentence(tmp_path):
    brief = write_brief(tmp_path)
    for words, said in (
        ((), "noise.recording: must name a file, or --recording must"),
        (("--recording", "rest.fif"), "the recording must be a file that ends in .edf, .bdf, .npz, .npy"),
        (("--recording", tmp_path / "missing.edf"), "missing.edf"),
    ):
        answer = run(brief, "--out", tmp_path / "out", *words)
        assert answer.exit_code == 2
        assert said in " ".join(answer.output.split())
        assert len([line for line in answer.output.splitlines() if line.strip()]) == 1
        assert not (tmp_path / "out").exists()
