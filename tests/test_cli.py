"""The command line as a user meets it: help, errors, files, and an audit by formulas of its own."""

import contextlib
import json
import os
import shlex
import signal
import subprocess
import sys
from pathlib import Path

import click
import numpy as np
import pytest
from click.testing import CliRunner
from scipy.linalg import null_space
from scipy.optimize import LinearConstraint, milp
from small_brief import MAGNETOMETERS, SMALL_BRIEF

from layout import __version__, design
from layout.cli import cli
from layout.errors import LayoutError
from layout.outputs import writer
from layout.outputs.design_files import audit_npz
from layout.outputs.ranking import ranking_json

ROOT = Path(__file__).parent.parent
COMMANDS = {"layout": cli, **{f"layout {name}": command for name, command in cli.commands.items()}}
BRIEFS = {
    "drawn": SMALL_BRIEF,
    "both": SMALL_BRIEF,
    "hurried": SMALL_BRIEF + "time_allowance_s = 1e-6\n",
    "electrodes": SMALL_BRIEF.replace(MAGNETOMETERS, ""),
    "spacing": SMALL_BRIEF.replace(MAGNETOMETERS, "")
    .replace('"10-20"', '"10-10"')
    .replace("contact_noise_uv", "spacing_mm = 45\ncontact_noise_uv"),
    "kept": SMALL_BRIEF.replace(MAGNETOMETERS, "")
    .replace("contact_noise_uv", 'reference = "T4"\ncontact_noise_uv')
    .replace("[noise]", '[places]\nkeep = ["T3"]\n[noise]'),
}


def invoke(*words):
    return CliRunner().invoke(cli, [str(word) for word in words])


def only_numbers(folder, result, audit, progress):
    """What the writer puts into the folder, less everything that is drawn."""
    writer._write(folder / "ranking.json", ranking_json(result))
    writer._write(folder / "audit.npz", audit_npz(result))


@pytest.fixture(scope="module")
def runs(tmp_path_factory):
    """A function that designs one of BRIEFS once, with its audit, and returns (output folder, what was printed)."""
    done = {}

    def run(name):
        if name not in done:
            folder = tmp_path_factory.mktemp(name)
            (folder / "study.toml").write_text(BRIEFS[name])
            with pytest.MonkeyPatch.context() as patch:
                if name != "drawn":  # drawing takes longer than all the rest, and one drawn run will do
                    patch.setattr(writer, "_fill", only_numbers)
                quick = [] if name == "drawn" else ["--quick"]
                answer = invoke("design", folder / "study.toml", "--out", folder / "out", "--audit", *quick)
            assert answer.exit_code == 0, answer.output
            done[name] = (folder / "out", answer)
        return done[name]

    return run


def read(folder):
    return json.loads((folder / "ranking.json").read_text(encoding="utf-8"))


# Help


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_has_help_and_an_example_that_parses(name):
    words = name.split()[1:]
    said = invoke(*words, "--help")
    assert said.exit_code == 0
    assert len(said.output.splitlines()) > 6
    line = next(line for line in said.output.splitlines() if line.strip().startswith("Example:"))
    example = shlex.split(line.split("Example:")[1])
    assert example[0] == "layout"
    command = cli.commands[example[1]]
    assert not words or example[1] == words[0]
    with command.make_context(example[1], example[2:]) as context:
        for value in context.params.values():
            if isinstance(value, Path) and value.parts[0] == "configs":
                assert (ROOT / value).is_file()


@pytest.mark.parametrize("name", COMMANDS)
def test_every_option_and_argument_is_explained(name):
    command = COMMANDS[name]
    for parameter in command.params:
        if isinstance(parameter, click.Option):
            assert parameter.help
        else:
            assert parameter.name.upper() in command.help


def test_layout_alone_is_help():
    assert invoke().exit_code == 0
    assert invoke().output == invoke("--help").output
    assert invoke("--version").output == f"layout, version {__version__}\n"


def test_help_needs_no_heavy_imports():
    heavy = ["numpy", "scipy", "matplotlib", "pydantic", "rich", "trimesh", "numba", "nibabel", "layout.design"]
    code = f"import sys, layout.cli; print([name for name in {heavy} if name in sys.modules])"
    said = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=ROOT)
    assert said.stdout == "[]\n"


def test_python_dash_m_runs_the_same_command():
    said = subprocess.run([sys.executable, "-m", "layout", "--version"], capture_output=True, text=True, cwd=ROOT)
    assert (said.returncode, said.stdout) == (0, f"layout, version {__version__}\n")


# What goes wrong


def with_design_that(monkeypatch, problem):
    def fail(brief, progress, **options):
        raise problem

    monkeypatch.setattr(design, "design", fail)


@pytest.fixture
def here(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "study.toml").write_text(SMALL_BRIEF)
    yield tmp_path
    assert [path.name for path in tmp_path.iterdir()] == ["study.toml"]


@pytest.mark.parametrize("said", ["one rule is broken", "one rule is broken.", "one\nrule is broken. "])
def test_an_error_is_one_sentence_with_one_full_stop(here, monkeypatch, said):
    with_design_that(monkeypatch, LayoutError(said))
    answer = invoke("design", "study.toml")
    assert (answer.exit_code, answer.output) == (2, "Error: one rule is broken.\n")


def test_ctrl_c_stops_without_debris(here, monkeypatch):
    with_design_that(monkeypatch, KeyboardInterrupt())
    answer = invoke("design", "study.toml")
    assert (answer.exit_code, answer.output) == (130, "Stopped.\n")


def test_ctrl_c_that_a_library_swallows_stops_all_the_same(here, monkeypatch):
    def swallow(brief, progress, **options):
        with contextlib.suppress(BaseException):
            signal.raise_signal(signal.SIGINT)
        progress("the next step")
        pytest.fail("went on after Ctrl-C")

    monkeypatch.setattr(design, "design", swallow)
    answer = invoke("design", "study.toml")
    assert (answer.exit_code, answer.output) == (130, "Stopped.\n")
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler


def test_what_a_swallowed_ctrl_c_leads_to_is_no_defect(here, monkeypatch):
    def swallow(brief, progress, **options):
        with contextlib.suppress(BaseException):
            signal.raise_signal(signal.SIGINT)
        raise IndexError("half-done work of a library")

    monkeypatch.setattr(design, "design", swallow)
    answer = invoke("design", "study.toml")
    assert (answer.exit_code, answer.output) == (130, "Stopped.\n")


@pytest.mark.parametrize("problem", [ArithmeticError("passed its bound"), RuntimeError("a defect")])
def test_defects_are_not_dressed_up_as_user_errors(here, monkeypatch, problem):
    with_design_that(monkeypatch, problem)
    assert invoke("design", "study.toml").exception is problem


def test_an_ascii_terminal_shows_question_marks():
    code = (
        "import sys; from layout.cli import main; sys.argv = ['layout', '--version']\n"
        "try: main()\n"
        "except SystemExit: print('20 µV')"
    )
    env = {"PYTHONPATH": str(ROOT), "PYTHONIOENCODING": "ascii"}
    said = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, env=env)
    assert (said.stdout.splitlines()[-1], said.stderr) == ("20 ?V", "")


def test_a_closed_pipe_is_quiet():
    reading, writing = os.pipe()
    os.close(reading)
    said = subprocess.run([sys.executable, "-m", "layout", "--help"], stdout=writing, stderr=subprocess.PIPE, cwd=ROOT)
    os.close(writing)
    assert said.stderr == b""


# What comes out


@pytest.mark.parametrize("kind", ["cap", "helmet", "budget"])
def test_new_writes_a_brief_that_loads(tmp_path, monkeypatch, kind):
    from layout.brief.parse import load_brief

    monkeypatch.chdir(tmp_path)
    answer = invoke("new", kind)
    assert answer.exit_code == 0
    assert f"layout check {kind}.toml" in answer.output
    assert load_brief(tmp_path / f"{kind}.toml").title


@pytest.mark.slow
def test_check_shows_counts_and_writes_the_picture(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "study.toml").write_text(SMALL_BRIEF)
    answer = invoke("check", "study.toml")
    assert answer.exit_code == 0, answer.output
    assert answer.stderr == ""
    said = " ".join(answer.output.split())
    for words in (
        "length 184 mm, breadth 184 mm, circumference 578 mm",  # 2 r, 2 r, 2 pi r of 92 mm
        "-40, -10, 54 24.0 CCP3",  # the sources' shell lies 92 - 80 + 12 mm under the scalp
        "gel cup (electrode) 4 19 19 19",
        "19 38 76",
        "80.0 (0.33), 85.0 (0.0165), 92.0 (0.33) mm",
        "ears 2",
        "Reference: any of the counted electrodes",
        "background EEG, rms at 10-20",
    ):
        assert words in said
    assert said.endswith("Picture: results/runs/study-check.png (and .svg)")
    made = sorted(str(path.relative_to(tmp_path)) for path in tmp_path.rglob("*.*"))
    assert made == ["results/runs/study-check.png", "results/runs/study-check.svg", "study.toml"]
    assert (tmp_path / made[0]).read_bytes().startswith(b"\x89PNG")
    assert b"</svg>" in (tmp_path / made[1]).read_bytes()


@pytest.mark.slow
def test_design_prints_the_tables_and_writes_the_folder(runs):
    out, answer = runs("drawn")
    assert answer.stderr == ""
    for words in ("Ranked layouts", "even spread", "random", "background EEG", "under this model"):
        assert words in answer.stdout
    assert answer.stdout.splitlines()[-1].startswith(f"Written to {out}: ")
    assert (out / "report.html").is_file()
    for rank in (1, 2):
        layout = out / f"layout-{rank}"
        assert {path.name for path in layout.iterdir()} >= {
            "sensors.csv",
            *(f"{name}.{ending}" for name in ("scalp", "cortex", "noise") for ending in ("png", "svg", "pdf")),
            "eeg-sidecar-template.json",
            "magnetometers.tsv",
            "magnetometers.json",
            "bids",
        }


def test_ranking_has_its_promised_keys(runs):
    ranking = read(runs("both")[0])
    assert {
        "goal",
        "unit",
        "bound",
        "seed",
        "version",
        "schema",
        "brief_sha256",
        "layouts",
        "baselines",
    } <= ranking.keys()
    assert [layout["rank"] for layout in ranking["layouts"]] == [1, 2]
    for layout in ranking["layouts"]:
        assert {"rank", "value", "gap_percent", "cost", "sensors"} <= layout.keys()
        assert layout["value"] <= layout["bound"] <= ranking["root_bound"] + 1e-8
        assert layout["gap_percent"] == pytest.approx(100 * (1 - layout["value"] / layout["bound"]), abs=1e-6)
    assert {base["name"] for base in ranking["baselines"]} >= {"even spread", "standard positions", "random"}


@pytest.mark.slow
def test_same_brief_same_bytes(runs, tmp_path):
    out, _ = runs("drawn")
    (tmp_path / "study.toml").write_text(SMALL_BRIEF)
    assert invoke("design", tmp_path / "study.toml", "--out", tmp_path / "again", "--audit").exit_code == 0
    again = {path.relative_to(tmp_path / "again"): path for path in (tmp_path / "again").rglob("*") if path.is_file()}
    assert set(again) == {path.relative_to(out) for path in out.rglob("*") if path.is_file()}
    assert len(again) > 60
    for name, path in again.items():
        assert path.read_bytes() == (out / name).read_bytes(), name


def test_a_stop_by_the_clock_is_said(runs):
    out, answer = runs("hurried")
    assert "stopped by its time allowance" in " ".join(answer.output.split())
    assert read(out)["stopped_by_clock"] is True


def test_no_stop_by_the_clock_where_none_was(runs):
    out, answer = runs("electrodes")
    assert read(out)["stopped_by_clock"] is False
    assert "time allowance" not in answer.output


def test_kept_sites_and_reference_under_old_names(runs):
    for layout in read(runs("kept")[0])["layouts"]:
        roles = {sensor["site"]: sensor["role"] for sensor in layout["sensors"]}
        assert roles.keys() >= {"T7", "T8"}
        assert [site for site, role in roles.items() if role == "reference"] == ["T8"]


# The audit, by plain formulas: the unknown reference is projected out instead of given a variance.


def audited_value(audit, candidates):
    """Information [bits]: half the log-determinant of signal and noise less that of noise, seen without the offset."""
    rows = np.isin(audit["candidate_of_channel"], candidates)
    target, nuisance, offset = (audit[name][rows] for name in ("target", "nuisance", "offset"))
    free = null_space(offset[None, :]) if offset.any() else np.eye(len(offset))
    noise = np.eye(len(offset)) + nuisance @ nuisance.T
    without = np.linalg.slogdet(free.T @ noise @ free)[1]
    return (np.linalg.slogdet(free.T @ (noise + target @ target.T) @ free)[1] - without) / (2 * np.log(2))


def audited_tangent(audit):
    """Relaxed value and its slope per candidate at the audit's weights.

    Projecting the offset out of weighted channels is taking their weighted mean row off every row: with
    Q = W - W o o' W / o' W o, the value is half log2 det(I + C' Q C) less the same of B, and the derivative of Q in one
    weight is the outer product of the unit vector less the mean's weights.
    """
    owner, offset = audit["candidate_of_channel"], audit["offset"]
    weight = audit["weights"][owner]
    both, nuisance = np.hstack([audit["target"], audit["nuisance"]]), audit["nuisance"]
    total, slope = 0.0, np.zeros(len(owner))
    scale = (weight * offset**2).sum()
    for sign, rows in ((1, both), (-1, nuisance)):
        mean = (weight * offset) @ rows / scale if scale > 0 else np.zeros(rows.shape[1])
        from_mean = rows - offset[:, None] * mean
        # C'QC is the weighted sum of squares about the mean, the offset being constant where it is not zero
        inner = np.eye(rows.shape[1]) + from_mean.T @ (weight[:, None] * from_mean)
        total += sign * np.linalg.slogdet(inner)[1]
        slope += sign * np.einsum("ij,ji->i", from_mean, np.linalg.solve(inner, from_mean.T))
    return total / (2 * np.log(2)), np.bincount(owner, slope / (2 * np.log(2)), len(audit["weights"]))


def best_pick(audit, price):
    """Largest total price of any allowed layout, by integer programming from the audit's pairs and counts."""
    n = len(price)
    groups = (audit["group"] == np.arange(len(audit["counts"]))[:, None]).astype(float)
    rules = [LinearConstraint(groups, audit["counts"], audit["counts"])]
    if len(audit["conflicts"]):
        pairs = np.zeros((len(audit["conflicts"]), n))
        pairs[np.arange(len(pairs))[:, None], audit["conflicts"]] = 1.0
        rules.append(LinearConstraint(pairs, -np.inf, 1.0))
    lower = np.isin(np.arange(n), audit["keep"]).astype(float)
    answer = milp(-price, constraints=rules, integrality=np.ones(n), bounds=(lower, np.ones(n)))
    assert answer.success
    return -answer.fun


@pytest.mark.parametrize("name", ["both", "electrodes", "spacing", "kept"])
def test_a_stranger_recomputes_values_and_bound_from_the_audit(runs, name):
    out, _ = runs(name)
    audit, ranking = dict(np.load(out / "audit.npz")), read(out)
    assert np.isclose(audit["bound"], ranking["bound"], rtol=1e-8)
    for row, value, layout in zip(audit["chosen"], audit["values"], ranking["layouts"], strict=True):
        chosen = row[row >= 0]
        assert chosen.tolist() == layout["chosen"]
        assert np.array_equal(np.bincount(audit["group"][chosen], minlength=len(audit["counts"])), audit["counts"])
        assert not np.isin(audit["conflicts"], chosen).all(axis=1).any()
        assert audited_value(audit, chosen) == pytest.approx(value, rel=1e-8)
        assert layout["value"] == pytest.approx(value, rel=1e-8)
    relaxed, slope = audited_tangent(audit)
    bound = relaxed - slope @ audit["weights"] + best_pick(audit, slope)
    if name == "spacing":  # the printed bound lets fractions of neighbours share a place, whole ones cannot
        assert bound <= audit["root_bound"] * (1 + 1e-6)
    else:
        assert bound == pytest.approx(float(audit["root_bound"]), rel=1e-6)
    assert audit["values"].max() <= bound * (1 + 1e-9)
