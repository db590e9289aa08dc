"""Every kind of evidence for the three users' briefs: assess, curve, placement, simulate and noise, each timed.

Run `python tests/bench/evidence.py [cap] [helmet] [budget] [COMMAND ...]` from the root; a command is one of the names
in the tables of times, and without any all are run. Each is a fresh process on the layout that results/ keeps of the
brief. Short tables and times go to results/<brief>/evidence/ as each ends, and results/evidence.md is made anew of all
that are there, so that the work may be done in parts. The recording is simulated: EEG drawn from the brief's own model
with known strengths, so that it can be seen whether they come back.
"""

from __future__ import annotations

import csv
import datetime
import os
import resource
import subprocess
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
from evidence_page import PAGE, page

ROOT = Path(__file__).parents[2]
BRIEFS = ("cap", "helmet", "budget")
TEN_TWENTY = "Fp1,Fp2,F7,F3,Fz,F4,F8,T7,C3,Cz,C4,T8,P7,P3,Pz,P4,P8,O1,O2"
STANDARD = {
    "cap": f"{TEN_TWENTY},FC5,FC6,CP5,CP6,Oz",
    "helmet": f"{TEN_TWENTY},Oz",
    "budget": "Fp1,Fp2,AF7,AF8,AF3,AF4,TP9,TP10",
}
WITHIN = {"cap": "10", "helmet": "30", "budget": "10"}  # slots of a helmet are farther apart and off the scalp
COUNTS = {"cap": "8:40:8", "helmet": "5:25:5", "budget": "4:14:2"}
NOISE = "1,0.3,0.1,0.05"
OTHER_GOAL = '\n[goal]\nkind = "localisation"\n'
BUDGET = "\n[budget]\ntotal = 136\nblock_channels = 8\nblock_price = 40\n"  # an amplifier of 8 channels at a time
BUDGETS = "64:184:24"
PLANTED = {"contacts": 1.6, "background": 1.25, "eyes": 0.6}  # times what the brief assumes
RATE, SECONDS = 256, 180


def commands(stem: str, folder: Path) -> dict[str, list[str]]:
    """Table's name -> words of the command that it comes from; `folder` holds what they need."""
    brief, own = str(ROOT / "configs" / f"{stem}.toml"), "design.csv"
    made = {
        "assess": ["assess", brief, own, STANDARD[stem], "--other-models", "--within-mm", WITHIN[stem]],
        "curve": ["curve", brief, "--counts", COUNTS[stem]],
        "curve-localisation": ["curve", "localisation.toml", "--counts", COUNTS[stem]],
    }
    if stem == "budget":
        made["curve-budget"] = ["curve", "bought.toml", "--budgets", BUDGETS]
    return made | {
        "placement": ["placement", brief, "--layout", own],
        "simulate": ["simulate", brief, "--layout", own, "--noise", NOISE],
        "noise": ["noise", brief, "--recording", "simulated-rest.edf"],
    }


def prepare(stem: str, folder: Path) -> None:
    """The brief's own layout and its variants."""
    kept = ROOT / "results" / stem / "layout-1" / "sensors.csv"
    (folder / "design.csv").write_bytes(kept.read_bytes())
    text = (ROOT / "configs" / f"{stem}.toml").read_text(encoding="utf-8")
    for file in (ROOT / "configs").glob("*.csv"):
        (folder / file.name).write_bytes(file.read_bytes())
    (folder / "localisation.toml").write_text(text + OTHER_GOAL, encoding="utf-8")
    (folder / "bought.toml").write_text(text.replace("count = 8", "count = 16") + BUDGET, encoding="utf-8")


def record(brief: Path, path: Path) -> None:
    """An EDF file of white signals at the 10-20 sites, whose covariance in the brief's band is that of its model with
    the planted strengths.
    """
    import edfio

    from layout.anatomy.positions import family_names
    from layout.brief.parse import load_brief
    from layout.design.problem import calibrated, patches
    from layout.design.study import lay_out_study
    from layout.noise.background import background_columns
    from layout.noise.eyes import eye_columns
    from layout.physics.channels import electrodes_at

    study = lay_out_study(load_brief(brief))
    names = [name for name in family_names("10-20") if name in study.standard]
    channels = electrodes_at(np.array([study.standard[name] for name in names]))
    labels, noise = patches(study), study.brief.noise
    assumed = calibrated(study, labels)
    contact = next((entry.contact_noise for entry in study.brief.stock if entry.kind == "electrode"), 1e-6)
    columns = np.hstack(
        [
            PLANTED["background"]
            * assumed.density
            * background_columns(channels, study.cortex, labels, study.head.cortex.areas),
            PLANTED["eyes"] * eye_columns(channels.eye_gain(study.cortex), assumed.eye),
            PLANTED["contacts"] * _contacts(study, channels, contact),
        ]
    )
    rng = np.random.default_rng([1, BRIEFS.index(brief.stem)])
    white = rng.normal(size=(columns.shape[1], RATE * SECONDS)) * np.sqrt(RATE / 2 / noise.bandwidth)
    microvolts = columns @ white * 1e6
    largest = 1.1 * float(np.abs(microvolts).max())
    signals = [
        edfio.EdfSignal(row, RATE, label=f"EEG {name}", physical_dimension="uV", physical_range=(-largest, largest))
        for name, row in zip(names, microvolts, strict=True)
    ]
    edfio.Edf(signals).write(path)


def _contacts(study: object, channels: object, contact: float) -> np.ndarray:
    """Contact noise of each electrode, zones of the brief heeded (n, n) [V]."""
    from layout.sensing.zones import zone_mask

    rms = np.full(len(channels), contact)
    for entry in study.brief.stock:
        for zone, inside in getattr(entry, "contact_noise_in", {}).items():
            rms[zone_mask(study.head, study.brief.places, zone, channels.positions, study.standard)] = inside
    return np.diag(rms)


KEPT = {  # command -> files kept, and which of their columns
    "assess": ("layouts.csv", "models.csv"),
    "curve": ("curve.csv",),
    "placement": ("placement.csv", "expected_loss.csv"),
    "simulate": ("simulation.csv",),
    "noise": ("noise.csv",),
}


def run(stem: str, wanted: list[str]) -> None:
    """The wanted commands of one brief; their tables and times."""
    keep = ROOT / "results" / stem / "evidence"
    keep.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name).resolve()
        prepare(stem, folder)
        if not wanted or "noise" in wanted:
            record(ROOT / "configs" / f"{stem}.toml", folder / "simulated-rest.edf")
        for table, words in commands(stem, folder).items():
            if wanted and table not in wanted:
                continue
            row = [table, *timed([*words, "--out", f"out-{table}"], folder)]
            print(stem, *row, flush=True)
            for file in KEPT[words[0]]:
                text = (folder / f"out-{table}" / file).read_text(encoding="utf-8")
                name = file if words[0] != "curve" else f"{table}.csv"
                (keep / name).write_text(shortened(text, STANDARD[stem]), encoding="utf-8")
            keep_times(keep / "seconds.csv", row, list(commands(stem, folder)))


def keep_times(path: Path, row: list[str], order: list[str]) -> None:
    """The table of times with one more or newer row."""
    rows = {}
    if path.exists():
        rows = {old[0]: old for old in list(csv.reader(path.read_text(encoding="utf-8").splitlines()))[1:]}
    rows[row[0]] = row
    with path.open("w", newline="", encoding="utf-8") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow(["command", "seconds", "processor_seconds", "load_before", "date"])
        writer.writerows(rows[name] for name in order if name in rows)


def timed(words: list[str], folder: Path) -> tuple[str, str, str, str]:
    """Run a command; seconds by the clock, of the processors, the machine's load before, and the date."""
    load, before, start = os.getloadavg()[0], resource.getrusage(resource.RUSAGE_CHILDREN), time.perf_counter()
    env = {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONIOENCODING": "utf-8"}
    done = subprocess.run([sys.executable, "-m", "layout", *words], cwd=folder, env=env, capture_output=True)
    seconds, after = time.perf_counter() - start, resource.getrusage(resource.RUSAGE_CHILDREN)
    if done.returncode:
        raise SystemExit(f"layout {' '.join(words)}: {done.stderr.decode()}")
    busy = after.ru_utime + after.ru_stime - before.ru_utime - before.ru_stime
    return f"{seconds:.0f}", f"{busy:.0f}", f"{load:.1f}", str(datetime.date.today())


def shortened(text: str, standard: str) -> str:
    """A table with short names of the layouts, and of a simulation only the rows of all plants together."""
    rows = list(csv.reader(text.splitlines()))
    called = {"design.csv": "design", "given layout": "design", standard: "standard positions given"}
    if "over" in rows[0]:
        over = rows[0].index("over")
        rows = [rows[0], *(row for row in rows[1:] if row[over] == "all")]
    lines = [[called.get(cell, cell) for cell in row] for row in rows]
    return "\n".join(",".join(f'"{cell}"' if "," in cell else cell for cell in row) for row in lines) + "\n"


def main() -> None:
    """Run what is named, or all, and make results/evidence.md of everything that is kept."""
    stems = [word for word in sys.argv[1:] if word in BRIEFS]
    for stem in stems or BRIEFS:
        run(stem, [word for word in sys.argv[1:] if word not in BRIEFS])
        (ROOT / "results" / PAGE).write_text(page(ROOT, BRIEFS, PLANTED, SECONDS), encoding="utf-8")


if __name__ == "__main__":
    main()
