"""Fitted strengths of the noise as lines of TOML, which give a brief the same noise without the recording."""

from __future__ import annotations

import json
import re

from layout.brief.objects import Brief, ElectrodeBrief
from layout.noise.calibration import Calibration
from layout.noise.recorded_strengths import BACKGROUND, CONTACTS, EYES, FIELD, GRADIENTS, MAGNETOMETERS
from layout.noise.recording import as_recorded
from layout.outputs.plain import one_line, significant
from layout.units import FT, FT_PER_CM, UV

BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")
DIGITS = 6


def brief_lines(brief: Brief, calibration: Calibration) -> str:
    """What was fitted, or held at the recording's limit, under the brief's own keys; the rest is left out.

    Each with its 95 % interval and the assumption as a comment. brief: as it assumes; calibration: from the recording.
    """
    recorded, noise = calibration.recorded, brief.noise
    strengths = {name: one for name, one in recorded.fit.strengths.items() if one.status in ("fitted", "limited")}

    def table(heading: str, *rows: tuple[str, str, float, float]) -> list[str]:
        """rows: name of the strength, key, size of amplitude 1 and the brief's assumption in the key's unit."""
        lines = []
        for name, key, size, assumed in rows:
            if name in strengths:
                one = strengths[name]
                low, high, before = (significant(value, 4) for value in (one.low * size, one.high * size, assumed))
                told = "95 %" if one.status == "fitted" else "the most that the recording allows,"
                lines.append(
                    f"{key} = {significant(one.amplitude * size, DIGITS)}  # {told} {low} to {high}; assumed {before}"
                )
        return ["", heading, *lines] if lines else []

    lines = []
    for entry, now in zip(brief.stock, as_recorded(brief, calibration).stock, strict=True):
        name = CONTACTS if isinstance(entry, ElectrodeBrief) else MAGNETOMETERS
        if recorded.stock.get(name) != entry.name:
            continue
        heading = f"# in the entry of [[stock]] with name = {_quoted(entry.name)}"
        if name == MAGNETOMETERS:
            size = entry.noise_density / FT
            lines += table(heading, (name, "noise_ft_per_rthz", size, size))
            continue
        size = entry.contact_noise / UV
        lines += table(heading, (name, "contact_noise_uv", size, size))
        if name in strengths and now.contact_noise_in:
            zones = [f"{_key(zone)} = {significant(rms / UV, DIGITS)}" for zone, rms in now.contact_noise_in.items()]
            lines.append(f"contact_noise_in_uv = {{ {', '.join(zones)} }}")
    eeg, eyes = noise.eeg_rms / UV, noise.eyes_rms / UV
    lines += table("[noise.background]", (BACKGROUND, "eeg_uv_rms", eeg, eeg))
    lines += table("[noise.eyes]", (EYES, "uv_rms", eyes, eyes))
    if FIELD in recorded.size:
        lines += table(
            "[noise.surroundings]",
            (FIELD, "field_ft_rms", recorded.size[FIELD] / FT, noise.field_rms / FT),
            (
                GRADIENTS,
                "gradient_ft_per_cm_rms",
                recorded.size[GRADIENTS] / FT_PER_CM,
                noise.gradient_rms / FT_PER_CM,
            ),
        )
    first = f"# Strengths of the noise fitted to {one_line(recorded.file)}, for the brief {_quoted(brief.title)}."
    if not lines:
        return f"{first}\n# The recording tells none of them: the brief's assumptions stay.\n"
    second = "# With these lines in their places, and without [noise.recording], the brief has the same noise."
    return "\n".join([first, second, *lines, ""])


def _key(name: str) -> str:
    """A key of TOML, quoted where it must be."""
    return name if BARE_KEY.fullmatch(name) else _quoted(name)


def _quoted(text: str) -> str:
    return json.dumps(one_line(text), ensure_ascii=False)
