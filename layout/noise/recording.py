"""Strengths of the noise from a recording: fitted where it was made, and so known for all candidate sites.

Contacts (or magnetometers), the background of the brain, the eyes, and for magnetometers the fields from outside keep
the shape that the model gives them at the recorded sites; a recording tells how strong each is. What it does not tell
stays as the brief assumes it.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from layout.anatomy.head import Head
from layout.anatomy.scalp_points import normals_at, project
from layout.brief.objects import Brief, ElectrodeBrief
from layout.errors import BriefError, FileError
from layout.noise.background import background_columns
from layout.noise.calibration import Calibration
from layout.noise.eyes import eye_columns
from layout.noise.recorded_covariance import RecordedCovariance, read_recording
from layout.noise.recorded_strengths import (
    BACKGROUND,
    CONTACTS,
    EYES,
    FIELD,
    GRADIENTS,
    MAGNETOMETERS,
    RecordedStrengths,
)
from layout.noise.strength_fit import fit_strengths
from layout.noise.surroundings import surroundings_columns
from layout.physics.channels import Channels, CortexModel
from layout.sensing.sites import FARTHEST_OFF_SCALP
from layout.sensing.zones import zone_mask
from layout.units import FT, FT_PER_CM, UV

# What a source counts as 1 where the brief has no size for it. What is fitted does not depend on it.
ANY_CONTACT, ANY_COIL, ANY_FIELD, ANY_GRADIENT = 1 * UV, 10 * FT, 100 * FT, 10 * FT_PER_CM


def with_recording(
    calibration: Calibration,
    brief: Brief,
    head: Head,
    cortex: CortexModel,
    labels: np.ndarray,
    standard: dict[str, np.ndarray],
) -> Calibration:
    """The calibration with its strengths fitted to the brief's recording; as it is where the brief names none.

    calibration: as assumed. labels (n_sources,): patches. standard: position name -> point (3,) [m]. The region's own
    cortex belongs to the background here, as it does in the recording. Raises FileError, BriefError.
    """
    recording = brief.noise.recording
    if recording is None:
        return calibration
    found = read_recording(recording, brief.noise.band, standard)
    channels = recorded_channels(found, head, recording.file.name)
    like = _stock_like_the_recorded(brief, found)
    contact, coil = _own_noise(brief, head, channels, like, standard)
    own = {CONTACTS: contact, MAGNETOMETERS: coil}
    noise, electrode = brief.noise, channels.is_electrode
    columns = {
        BACKGROUND: calibration.density * background_columns(channels, cortex, labels, cortex.head.cortex.areas),
    }
    size = {BACKGROUND: calibration.density}
    if calibration.eye:
        columns[EYES], size[EYES] = eye_columns(channels.eye_gain(cortex), calibration.eye), calibration.eye
    for name, here in ((CONTACTS, electrode), (MAGNETOMETERS, ~electrode)):
        if here.any():
            columns[name] = np.diag(np.where(here, own[name][1], 0.0))
            size[name] = own[name][0]
    assumed = dict.fromkeys(columns, 1.0)
    if not electrode.all():
        size |= {FIELD: noise.field_rms or ANY_FIELD, GRADIENTS: noise.gradient_rms or ANY_GRADIENT}
        outside = surroundings_columns(channels.positions, channels.axes, size[FIELD], size[GRADIENTS])
        columns[FIELD], columns[GRADIENTS] = outside[:, :3], outside[:, 3:]
        assumed |= {FIELD: float(noise.field_rms > 0), GRADIENTS: float(noise.gradient_rms > 0)}
    parts = {name: one @ one.T for name, one in columns.items()}
    fit = fit_strengths(found.covariance, found.samples, parts, found.offsets, assumed, found.blocks)
    recorded = RecordedStrengths(
        file=recording.file.name,
        fit=fit,
        size=size,
        stock={name: like[name] for name in (CONTACTS, MAGNETOMETERS) if name in size and like[name] is not None},
        silent_about=tuple(
            entry.name for entry in brief.stock if entry.name not in {one for name, one in like.items() if name in size}
        ),
        electrodes=int(electrode.sum()),
        magnetometers=int((~electrode).sum()),
        seconds=found.seconds,
        band=found.band,
        wider=found.band != noise.band,
        eyes_off=not calibration.eye,
        blocks=0 if found.blocks is None else len(found.blocks),
        remarks=found.notes,
    )
    return _scaled(calibration, recorded)


def as_recorded(brief: Brief, calibration: Calibration) -> Brief:
    """The brief with the sensors' own noise, and the fields from outside, that its recording tells of."""
    recorded = calibration.recorded
    if recorded is None:
        return brief
    stock = []
    for entry in brief.stock:
        name = CONTACTS if isinstance(entry, ElectrodeBrief) else MAGNETOMETERS
        if recorded.stock.get(name) != entry.name:
            stock.append(entry)
            continue
        factor = recorded.fit.strengths[name].amplitude
        if name == MAGNETOMETERS:
            stock.append(replace(entry, noise_density=factor * entry.noise_density))
        else:
            in_zones = {zone: factor * size for zone, size in entry.contact_noise_in.items()}
            stock.append(replace(entry, contact_noise=factor * entry.contact_noise, contact_noise_in=in_zones))
    noise = brief.noise
    if FIELD in recorded.size:
        noise = replace(noise, field_rms=recorded.value(FIELD), gradient_rms=recorded.value(GRADIENTS))
    return replace(brief, stock=tuple(stock), noise=noise)


def recorded_channels(found: RecordedCovariance, head: Head, file: str) -> Channels:
    """The channels of a recording on the head, electrodes on the scalp.

    Raises FileError for an electrode more than 30 mm off the scalp, or a magnetometer inside the head.
    """
    where = project(head.scalp, found.positions)
    normals, away = normals_at(head.scalp, where), found.positions - where.positions
    off, electrode = np.linalg.norm(away, axis=1), found.is_electrode
    for i in np.flatnonzero(electrode & (off > FARTHEST_OFF_SCALP)):
        raise FileError(
            f"{file}: electrodes must lie within 30 mm of the scalp, but {found.names[i]} is {1e3 * off[i]:.0f} mm off."
        )
    for i in np.flatnonzero(~electrode & ((away * normals).sum(axis=1) <= 0)):
        raise FileError(f"{file}: magnetometers must lie outside the head, but {found.names[i]} does not.")
    positions = np.where(electrode[:, None], where.positions, found.positions)
    return Channels(positions, found.axes, electrode, normals)


def _stock_like_the_recorded(brief: Brief, found: RecordedCovariance) -> dict[str, str | None]:
    """Names of the stock entries whose own noise the recording tells; None where there is no such entry."""
    said = brief.noise.recording.sensors
    kinds = {CONTACTS: "electrode", MAGNETOMETERS: "magnetometer"}
    named = {entry.name: entry.kind for entry in brief.stock}
    for one in said or ():
        if named.get(one) not in kinds.values():
            known = ", ".join(name for name, kind in named.items() if kind in kinds.values())
            raise BriefError(
                f"noise.recording.sensors: must name electrodes or magnetometers of the stock ({known}), but {one!r} "
                "was given."
            )
    like = {}
    for what, kind in kinds.items():
        mine = [one for one in (named if said is None else said) if named[one] == kind]
        if said is not None and len(mine) > 1:
            raise BriefError(
                f"noise.recording.sensors: must name one entry of {kind}s, but {', '.join(mine)} were given."
            )
        like[what] = mine[0] if mine else None
    return like


def _own_noise(
    brief: Brief, head: Head, channels: Channels, like: dict[str, str | None], standard: dict[str, np.ndarray]
) -> tuple[tuple[float, np.ndarray], tuple[float, np.ndarray]]:
    """Of contacts and of magnetometers: what counts as 1 [V rms, T/sqrt(Hz)], and the rms (n,) at each channel then.

    Contacts that the brief has noisier in some zones are so in the recording too.
    """
    entries = {entry.name: entry for entry in brief.stock}
    contact, at_site = ANY_CONTACT, np.full(len(channels), ANY_CONTACT)
    if like[CONTACTS] is not None:
        entry = entries[like[CONTACTS]]
        contact, at_site = entry.contact_noise, np.full(len(channels), entry.contact_noise)
        for zone, in_zone in entry.contact_noise_in.items():
            at_site[zone_mask(head, brief.places, zone, channels.positions, standard)] = in_zone
    coil = ANY_COIL if like[MAGNETOMETERS] is None else entries[like[MAGNETOMETERS]].noise_density
    return (contact, at_site), (coil, np.full(len(channels), coil * np.sqrt(brief.noise.bandwidth)))


def _scaled(calibration: Calibration, recorded: RecordedStrengths) -> Calibration:
    brain = recorded.fit.strengths[BACKGROUND].amplitude
    eyes = recorded.fit.strengths[EYES].amplitude if EYES in recorded.size else 1.0
    return replace(
        calibration,
        density=brain * calibration.density,
        eye=eyes * calibration.eye,
        eeg=brain * calibration.eeg,
        eeg_here=brain * calibration.eeg_here,
        magnetic_off=brain * calibration.magnetic_off,
        magnetic_on=brain * calibration.magnetic_on,
        recorded=recorded,
    )
