"""Strengths of the noise fitted to a recording, beside what the brief assumes: tables, JSON, and lines for a brief."""

from __future__ import annotations

import json
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Literal

from layout.outputs.cautions import CAUTIONS
from layout.outputs.curve_tables import columns_text, csv_text
from layout.outputs.plain import fixed, for_json, one_line, significant
from layout.outputs.terminal import new_table, print_notes, say

if TYPE_CHECKING:
    from rich.console import Console

FILES = ("noise.csv", "noise.json", "columns.json", "noise-for-brief.txt")
SCHEMA = 1

Status = Literal["fitted", "limited", "assumed", "absent", "not recorded"]
STATUSES = {
    "fitted": "fitted",
    "limited": "the most it allows",
    "assumed": "kept, not told",
    "absent": "kept, not seen",
    "not recorded": "kept, not recorded",
}


@dataclass(frozen=True)
class NoiseStrength:
    """One strength in the unit of the brief's key. key: where a brief states it, "" for what follows from another;
    entry: of the stock, "" for none. assumed: by the brief, None where it has none. value: what designs use. low, high:
    of the 95 % interval, None where the recording says nothing.
    """

    what: str
    key: str
    entry: str
    unit: str
    assumed: float | None
    value: float
    low: float | None
    high: float | None
    status: Status

    @property
    def assumption(self) -> str:
        """Where the brief's assumption lies: "inside" the interval, "below" or "above" it, "" where it cannot be
        said.
        """
        if self.assumed is None or self.low is None or self.high is None:
            return ""
        if self.assumed < self.low:
            return "below"
        return "above" if self.assumed > self.high else "inside"


@dataclass(frozen=True)
class NoiseFit:
    """The noise of a brief fitted to a recording.

    samples: effective number of independent ones, samples_if_flat: 2 x bandwidth x seconds. blocks: stretches that the
    intervals are from, 0 where they are from the number of samples. deviance, freedom, probability: of the likelihood
    ratio, None where it cannot be judged; variance_residual: rms relative difference of measured and fitted variances;
    goodness: both in words. lines: of TOML, which give a brief the same noise without the recording.
    """

    title: str
    sha256: str
    version: str
    file: str
    electrodes: int
    magnetometers: int
    seconds: float
    band: tuple[float, float]
    samples: float
    samples_if_flat: float
    blocks: int
    deviance: float | None
    freedom: int
    probability: float | None
    variance_residual: float
    goodness: str
    strengths: tuple[NoiseStrength, ...]
    notes: tuple[str, ...]
    lines: str


COLUMNS = {
    "strength": ("What makes the noise", ""),
    "key": ("Where a brief states it; empty for what follows from another strength", ""),
    "entry": ("Entry of the stock that it is of, empty for none", ""),
    "unit": ("Unit of the following numbers", ""),
    "assumed": ("What the brief assumes, empty where it assumes nothing", ""),
    "value": ("What a design with this recording uses", ""),
    "low": ("Lower end of the 95 % interval, empty where the recording says nothing", ""),
    "high": ("Upper end of the 95 % interval", ""),
    "status": (
        "fitted: bounded by the recording on both sides; limited: assumed stronger than it allows, taken at its limit; "
        "assumed: kept, within what it allows; absent: kept, it does not see it; not recorded: kept",
        "",
    ),
    "assumption": ("Whether the brief's assumption lies inside, below or above the interval", ""),
}


def noise_files(fit: NoiseFit) -> dict[str, str]:
    """File name -> text of everything that a fit writes."""
    texts = (noise_csv(fit), noise_json(fit), columns_text({FILES[0]: COLUMNS}), fit.lines)
    return dict(zip(FILES, texts, strict=True))


def noise_csv(fit: NoiseFit) -> str:
    """One row for each strength."""
    rows = [
        [
            one_line(one.what),
            one.key,
            one_line(one.entry),
            one.unit,
            *(significant(value, 6) for value in (one.assumed, one.value, one.low, one.high)),
            one.status,
            one.assumption,
        ]
        for one in fit.strengths
    ]
    return csv_text(list(COLUMNS), rows)


def noise_json(fit: NoiseFit) -> str:
    """Everything in the tables; strengths in the units that stand beside them."""
    content = {"schema": SCHEMA, **asdict(fit), "cautions": CAUTIONS}
    content["strengths"] = [{**asdict(one), "assumption": one.assumption} for one in fit.strengths]
    return json.dumps(for_json(content), indent=2, ensure_ascii=False) + "\n"


def print_noise(fit: NoiseFit, console: Console) -> None:
    """The recording, what it is worth, every strength beside the brief's, the fit, the notes. 80 columns."""
    from rich.text import Text

    say(console, fit.title, style="bold")
    say(console, recording_sentence(fit))
    table = new_table("Strengths of the noise (rms), with 95 % intervals")
    table.add_column("strength", overflow="fold")
    for name in ("assumed", "now", "from", "to"):
        table.add_column(name, justify="right", no_wrap=True)
    table.add_column("unit", no_wrap=True)
    table.add_column("", overflow="fold")
    for one in fit.strengths:
        status = STATUSES[one.status]
        if one.status == "fitted" and one.assumption != "inside":
            status += ", assumed too " + {"below": "low", "above": "high"}[one.assumption] if one.assumption else ""
        table.add_row(
            Text(one_line(one.what) + (f", {one_line(one.entry)}" if one.entry else "")),
            *(significant(value, 3, "-") for value in (one.assumed, one.value, one.low, one.high)),
            one.unit,
            Text(status, style="yellow" if one.assumption not in ("", "inside") else ""),
        )
    console.print(table)
    say(
        console,
        "assumed: by the brief; now: what a design with this recording uses. What a recording does not tell is kept as "
        "assumed.",
    )
    say(console, fit_sentence(fit))
    print_notes({"What to know": fit.notes}, console)


def recording_sentence(fit: NoiseFit) -> str:
    """What was recorded and what it is worth."""
    made_of = [f"{fit.electrodes} electrodes"] * bool(fit.electrodes)
    made_of += [f"{fit.magnetometers} magnetometers"] * bool(fit.magnetometers)
    worth = f"{fit.samples:.0f} independent samples"
    if fit.samples < fit.samples_if_flat * 0.995:
        worth += f", of {fit.samples_if_flat:.0f} that a flat spectrum would give"
    return (
        f"{fit.file}: {' and '.join(made_of)}, {fit.seconds:.4g} s in {fit.band[0]:g}-{fit.band[1]:g} Hz, worth {worth}"
        " (2 x bandwidth x seconds), whatever the reference."
    )


def fit_sentence(fit: NoiseFit) -> str:
    """How well the model fits the recording, in words and numbers."""
    chance = "" if fit.probability is None else f", probability {_chance(fit.probability)}"
    return (
        f"Goodness of fit: measured variances differ from the fit by {fixed(100 * fit.variance_residual, 0)} % rms; "
        f"{fit.goodness}{chance}."
    )


def _chance(probability: float) -> str:
    return "under 0.001" if probability < 1e-3 else significant(probability, 2)
