"""[[stock]] of the brief with kind = "gradiometer"."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from layout.brief.objects_stock import Gradients, GradiometerShape
from layout.brief.schema_common import UNSET, Into, broken_rule
from layout.brief.schema_stock import HousedForm
from layout.units import FT, FT_PER_CM, MM

NOISE_KEYS = ("noise_ft_per_rthz", "noise_ft_per_cm_per_rthz", "coil_noise_ft_per_rthz")
Noise = Annotated[float, Field(ge=1e-2, le=1e6)]


class GradiometerForm(HousedForm):
    """[[stock]] with kind = "gradiometer".

    Noise in one of three ways: of the difference, of the difference over the baseline, or of each of the two coils.
    """

    kind: Literal["gradiometer"]
    form: Annotated[GradiometerShape, Into("shape")]
    baseline_mm: Annotated[float, Field(ge=1, le=150), Into("baseline", MM)]
    noise_ft_per_rthz: Annotated[Noise, Into("noise_density", FT)] = UNSET
    noise_ft_per_cm_per_rthz: Annotated[Noise, Into("noise_over_baseline", FT_PER_CM)] = UNSET
    coil_noise_ft_per_rthz: Annotated[Noise, Into("coil_noise", FT)] = UNSET
    gradients: Gradients = UNSET

    @property
    def axes(self) -> None:
        """A gradiometer has no choice of axes: its coils lie across the normal."""
        return UNSET

    @model_validator(mode="after")
    def _check_noise(self) -> GradiometerForm:
        given = [key for key in NOISE_KEYS if getattr(self, key) is not UNSET]
        if not given:
            raise broken_rule(f"must be given, or one of {' and '.join(NOISE_KEYS[1:])}", NOISE_KEYS[0])
        if len(given) > 1:
            raise broken_rule(f"must be left out where {given[0]} is given (the noise is stated once)", given[1])
        return self

    @model_validator(mode="after")
    def _check_gradients(self) -> GradiometerForm:
        if self.form == "axial" and self.gradients is not UNSET:
            raise broken_rule('must be left out unless form is "planar"', "gradients")
        return self

    @model_validator(mode="after")
    def _check_extent(self) -> GradiometerForm:
        along, across = 0.0, self.coil_mm or 0.0
        if self.cell_mm is not UNSET:
            along, across = self.cell_mm[2], max(self.cell_mm[:2])
        baseline = (self.baseline_mm, 0.0) if self.form == "axial" else (0.0, self.baseline_mm)
        self.check_inside("baseline_mm", along, across, baseline)
        return self
