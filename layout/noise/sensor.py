"""Noise of the sensors themselves, channel by channel."""

from __future__ import annotations

import numpy as np

from layout.anatomy.head import Head
from layout.brief.objects import Brief
from layout.brief.objects_stock import HOUSED
from layout.sensing.candidates import Candidates
from layout.sensing.zones import zone_mask


def sensor_noise(head: Head, brief: Brief, candidates: Candidates, standard: dict[str, np.ndarray]) -> np.ndarray:
    """rms of each channel's own noise in the brief's band (n_channels,) [V or T], of a single epoch.

    Electrodes: the contact noise, or that of the last zone of `contact_noise_in` which holds the site. Magnetometers
    and gradiometers: one-sided density times the square root of the bandwidth.
    """
    kind, sites = candidates.kind[candidates.candidate_of_channel], candidates.sites
    noise = np.empty(len(kind))
    for index, entry in enumerate(brief.stock):
        mine = kind == index
        if entry.kind in HOUSED:
            noise[mine] = entry.noise_density * np.sqrt(brief.noise.bandwidth)
            continue
        at_site = np.full(len(sites), entry.contact_noise)
        for zone, in_zone in entry.contact_noise_in.items():
            at_site[zone_mask(head, brief.places, zone, sites.positions, standard, sites.names)] = in_zone
        noise[mine] = at_site[candidates.site_of_channel[mine]]
    return noise
