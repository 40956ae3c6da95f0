"""Spectral responses of the kinds that sensors have, for the tests."""

from __future__ import annotations

import numpy as np

from groundglow.physics.spectral_response import SpectralResponse, gaussian, top_hat

# "measured" is invented: uneven nodes, a tilt, ripples and zero ends, as laboratory tables have them.
_NODES = np.concatenate(
    [np.arange(10.0, 10.55, 0.05), np.arange(10.58, 11.22, 0.02), np.arange(11.25, 11.9, 0.05)]
)
_RIPPLED = np.exp(-(((_NODES - 10.92) / 0.42) ** 6)) * (
    1.0 - 0.25 * (_NODES - 10.9) + 0.04 * np.sin(40.0 * _NODES)
)

RESPONSES = {
    "narrow": top_hat(10.60, 11.19),
    "long": top_hat(11.50, 12.51),
    "wide": top_hat(10.40, 12.50),
    "short window": top_hat(8.125, 8.475),
    "measured": SpectralResponse(_NODES, np.where(_RIPPLED < 1e-3, 0.0, _RIPPLED)),
    "gaussian": gaussian(10.8, 0.6),
    "uncooled camera": top_hat(7.5, 13.5),
    "midwave camera": top_hat(3.5, 4.1),
}
