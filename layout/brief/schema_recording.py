"""[noise.recording] of the brief."""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field, model_validator

from layout.brief.schema_common import UNSET, Form, FromList, Into, Name, Names, broken_rule, checked_text
from layout.units import UV

SIGNAL_FILES = (".edf", ".bdf")
COVARIANCE_FILES = (".npz", ".npy")
Frequency = Annotated[float, Field(gt=0, le=10_000)]
FileName = Annotated[str, checked_text(1000)]


def _known_type(file: str) -> str:
    endings = (*SIGNAL_FILES, *COVARIANCE_FILES)
    if not file.lower().endswith(endings):
        raise broken_rule(f"must end in {', '.join(endings)}")
    return file


class RecordingForm(Form):
    """[noise.recording]"""

    file: Annotated[FileName, AfterValidator(_known_type)]
    bad: Names = UNSET
    band_hz: Annotated[tuple[Frequency, ...], FromList, Field(min_length=2, max_length=2), Into("band")] = UNSET
    reference: Name = UNSET
    electrodes_tsv: FileName = UNSET
    largest_uv: Annotated[float, Field(ge=1, le=100_000), Into("largest", UV)] = UNSET
    sensors: Annotated[Names, Field(min_length=1)] = UNSET
    channels: Annotated[Names, Field(min_length=1, max_length=1000)] = UNSET
    unit: Name = UNSET
    seconds: Annotated[float, Field(gt=0, le=1e9)] = UNSET

    @model_validator(mode="after")
    def _check(self) -> RecordingForm:
        if self.file.lower().endswith(SIGNAL_FILES):
            for key in ("channels", "unit", "seconds"):
                if getattr(self, key) is not UNSET:
                    raise broken_rule("must be left out where the file holds signals (it says so itself)", key)
        elif self.largest_uv is not UNSET:
            raise broken_rule("must be left out where the file holds a covariance, not signals", "largest_uv")
        return self


def check_band(recording: RecordingForm | None, band: tuple[float, float]) -> None:
    """Raises the refusal of a recording's band that does not contain the band of the noise [Hz]."""
    if recording is UNSET or recording.band_hz is UNSET:
        return
    low, high = recording.band_hz
    if low > band[0] or high < band[1]:
        rule = f"must contain noise.band_hz ({band[0]:g} to {band[1]:g} Hz)"
        raise broken_rule(rule, "recording", "band_hz", value=[low, high])
