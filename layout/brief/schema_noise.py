"""[noise] of the brief."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from layout.brief.schema_common import UNSET, Form, FromList, Into, broken_rule
from layout.brief.schema_recording import RecordingForm, check_band
from layout.units import CM2, FT, FT_PER_CM, UV

Frequency = Annotated[float, Field(gt=0, le=10_000)]


class BackgroundForm(Form):
    """[noise.background]"""

    eeg_uv_rms: Annotated[float, Field(gt=0, le=1000), Into("eeg_rms", UV)] = UNSET
    patch_cm2: Annotated[float, Field(ge=0.01, le=200), Into("patch_area", CM2)] = UNSET
    include_regions: Annotated[bool, Into("regions_in_background")] = UNSET


class EyesForm(Form):
    """[noise.eyes]"""

    uv_rms: Annotated[float, Field(ge=0, le=10_000), Into("eyes_rms", UV)] = UNSET


class SurroundingsForm(Form):
    """[noise.surroundings]"""

    field_ft_rms: Annotated[float, Field(ge=0, le=1e9), Into("field_rms", FT)] = UNSET
    gradient_ft_per_cm_rms: Annotated[float, Field(ge=0, le=1e9), Into("gradient_rms", FT_PER_CM)] = UNSET


class NoiseForm(Form):
    """[noise]"""

    band_hz: Annotated[tuple[Frequency, ...], FromList, Field(min_length=2, max_length=2), Into("band")]
    averages: Annotated[int, Field(ge=1, le=1_000_000)] = UNSET
    background: BackgroundForm = BackgroundForm()
    eyes: EyesForm = EyesForm()
    surroundings: SurroundingsForm = SurroundingsForm()
    recording: RecordingForm = UNSET

    @model_validator(mode="after")
    def _check(self) -> NoiseForm:
        if self.band_hz[1] <= self.band_hz[0]:
            raise broken_rule("must be increasing, low edge first", "band_hz")
        check_band(self.recording, self.band_hz)
        return self
