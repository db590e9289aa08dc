"""Noise of the sensors themselves, channel by channel."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head
from layout.brief.objects import Brief
from layout.sensing.candidates import Candidates
from layout.sensing.zones import zone_mask


def sensor_noise(head: Head, brief: Brief, candidates: Candidates, standard: dict[str, np.ndarray]) -> np.ndarray:
    """rms of each channel's own noise in the brief's band (n_channels,) [V or T], of a single epoch.

    Electrodes: the contact noise, or that of the last zone of `contact_noise_in` which holds the site. Magnetometers:
    one-sided density times the square root of the bandwidth.
    """
    per_candidate = np.empty(len(candidates))
    for index, entry in enumerate(brief.stock):
        mine = candidates.kind == index
        if entry.kind == "magnetometer":
            per_candidate[mine] = entry.noise_density * np.sqrt(brief.noise.bandwidth)
            continue
        at_site = np.full(len(candidates.sites), entry.contact_noise)
        for zone, noise in entry.contact_noise_in.items():
            at_site[zone_mask(head, brief.places, zone, candidates.sites.positions, standard)] = noise
        per_candidate[mine] = at_site[candidates.site[mine]]
    return per_candidate[candidates.candidate_of_channel]
