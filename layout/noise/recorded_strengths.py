"""What a recording told about the noise, in numbers and in words."""

from __future__ import annotations

from dataclasses import dataclass, replace

from layout.noise.calibration import Figure
from layout.noise.strength_fit import Strength, StrengthFit
from layout.units import FT, FT_PER_CM, MM2, NAM, PERCENT, UV

CONTACTS, MAGNETOMETERS = "contacts", "magnetometers"
BACKGROUND, EYES, FIELD, GRADIENTS = "background", "eyes", "field", "gradients"
REJECTED = 0.01  # probability under which a fit is called wrong

_WORDS = {
    CONTACTS: ("contact noise, rms", "µV", UV),
    MAGNETOMETERS: ("magnetometers' own noise", "fT/√Hz", FT),
    BACKGROUND: ("background moment density, rms", "nAm/mm²", NAM / MM2),
    EYES: ("eye dipole, rms of each component", "nAm", NAM),
    FIELD: ("field from outside, rms of each component", "fT", FT),
    GRADIENTS: ("gradients from outside, rms of each", "fT/cm", FT_PER_CM),
}
_PROPORTIONAL = {  # figures of the calibration -> the strength that they follow
    "background EEG implied here, rms": BACKGROUND,
    "background EEG, rms at 10-20 sites": BACKGROUND,
    "background moment density, rms": BACKGROUND,
    "eye dipole, rms of each component": EYES,
}


@dataclass(frozen=True)
class RecordedStrengths:
    """The fit to a recording, and what of a brief it speaks about.

    size: strength name -> what counts as amplitude 1 [V, T/sqrt(Hz), A/m, A·m, T, T/m]. stock: contacts or
    magnetometers -> the entry whose own noise was fitted; silent_about: the other entries. wider: the recording's band
    is wider than the brief's. eyes_off: the brief has no eye activity. blocks: stretches of the recording that the
    intervals are from, 0 where they are from the number of samples. remarks: what was left out of the recording.
    """

    file: str
    fit: StrengthFit
    size: dict[str, float]
    stock: dict[str, str]
    silent_about: tuple[str, ...]
    electrodes: int
    magnetometers: int
    seconds: float
    band: tuple[float, float]
    wider: bool
    eyes_off: bool
    blocks: int
    remarks: tuple[str, ...]

    def value(self, name: str) -> float:
        """A strength in its SI unit."""
        return self.fit.strengths[name].amplitude * self.size[name]

    def figures(self, calibrated: dict[str, Figure]) -> dict[str, Figure]:
        """The figures of the calibration with what was fitted beside them, the strengths it lacks, and the fit."""
        figures = {}
        for label, figure in calibrated.items():
            name = _PROPORTIONAL.get(label)
            strength = self.fit.strengths.get(name)
            if strength is not None and strength.amplitude > 0:
                per_amplitude = figure.value / strength.amplitude
                figure = replace(figure, remark=self._told(strength, per_amplitude))
            figures[label] = figure
        for name in (CONTACTS, MAGNETOMETERS, FIELD, GRADIENTS):
            strength = self.fit.strengths.get(name)
            if strength is None or (strength.status != "fitted" and strength.amplitude == 0):
                continue
            label, unit, si = _WORDS[name]
            per_amplitude = self.size[name] / si
            figures[label] = Figure(
                strength.amplitude * per_amplitude, unit, remark=self._told(strength, per_amplitude)
            )
        figures["variances of the recording against the fit, rms difference"] = Figure(
            self.fit.variance_residual / PERCENT, "%", remark=self.goodness
        )
        return figures

    @property
    def goodness(self) -> str:
        """How well the model fits, by its likelihood ratio against any covariance at all."""
        fit = self.fit
        if fit.deviance is None:
            return "no likelihood ratio: too few samples, or a covariance of fewer dimensions than channels"
        text = f"deviance {fit.deviance:.0f} on {fit.freedom} degrees of freedom"
        if fit.probability < REJECTED:
            narrow = "" if self.blocks else ", and the intervals are too narrow"
            return f"{text}: the model is not all of the recording{narrow}"
        return f"{text}: no sign of a wrong model"

    @property
    def notes(self) -> tuple[str, ...]:
        """Sentences for the reader of a result."""
        fit = self.fit
        made_of = [f"{self.electrodes} electrodes"] * bool(self.electrodes)
        made_of += [f"{self.magnetometers} magnetometers"] * bool(self.magnetometers)
        low, high = self.band
        notes = [
            f"Strengths of the noise are fitted to {self.file}: {' and '.join(made_of)}, {self.seconds:.4g} s in "
            f"{low:g}-{high:g} Hz, worth {fit.samples:.0f} independent samples, whatever the reference."
        ]
        fitted = [self._sentence(name) for name, one in fit.strengths.items() if one.status == "fitted"]
        if fitted:
            how = f" from how {self.blocks} stretches of it differ" if self.blocks else ""
            notes.append(f"Fitted, with 95 % intervals{how}: {'; '.join(fitted)}.")
        others = [self._sentence(name) for name, one in fit.strengths.items() if one.status != "fitted"]
        if others:
            notes.append(f"Not told by the recording: {'; '.join(others)}.")
        notes += self.untold
        notes.append(
            f"Variances of the recording differ from the fit by {fit.variance_residual / PERCENT:.0f} % rms; "
            f"{self.goodness}."
        )
        if self.remarks:
            notes.append(f"In {self.file}: {'; '.join(self.remarks)}.")
        return tuple(notes)

    @property
    def untold(self) -> tuple[str, ...]:
        """Sentences on what such a recording cannot tell."""
        notes = []
        if not self.magnetometers:
            notes.append(
                "A recording of electrodes says nothing of magnetometers' own noise or of fields from outside, which "
                "stay as assumed."
            )
        if not self.electrodes:
            notes.append("A recording of magnetometers says nothing of contact noise, which stays as assumed.")
        if self.silent_about:
            notes.append(f"Own noise as assumed, not recorded: {', '.join(self.silent_about)}.")
        if self.eyes_off:
            notes.append("The brief has no eye activity, so what there was of it counts as the other sources.")
        if self.wider:
            notes.append("The recording's band is wider than the brief's, so the fitted strengths are upper estimates.")
        return tuple(notes)

    def _told(self, strength: Strength, per_amplitude: float) -> str:
        low, high = strength.low * per_amplitude, strength.high * per_amplitude
        return {
            "fitted": f"fitted to {self.file}, 95 % {low:.4g} to {high:.4g}",
            "assumed": f"as assumed: {self.file} allows 0 to {high:.4g}",
            "limited": f"as much as {self.file} allows, assumed more",
            "absent": f"as assumed: {self.file} does not see it",
        }[strength.status]

    def _sentence(self, name: str) -> str:
        label, unit, si = _WORDS[name]
        entry = f" of {self.stock[name]}" if name in self.stock else ""
        strength, per_amplitude = self.fit.strengths[name], self.size[name] / si
        value = strength.amplitude * per_amplitude
        if strength.status == "fitted":
            low, high = strength.low * per_amplitude, strength.high * per_amplitude
            return f"{label}{entry} {value:.4g} {unit} ({low:.4g} to {high:.4g})"
        return f"{label}{entry} {value:.4g} {unit} ({self._told(strength, per_amplitude)})"
