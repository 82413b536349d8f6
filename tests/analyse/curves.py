"""Finished simulation tests to draw and tell of: small, seeded, one for each direction."""

from __future__ import annotations

import numpy as np

from analyse.envelopes import Envelope, global_envelope

SIMULATIONS = 199


def envelope(name: str, *, lift: float = 0.0, at: float = 4.0, seed: int = 1) -> Envelope:
    """A curve about 1 that is lifted or lowered around one distance."""
    rng = np.random.default_rng(seed)
    x = np.linspace(0.5, 20, 40)
    simulated = 1 + rng.normal(0, 0.1, (SIMULATIONS, x.size))
    observed = np.ones(x.size) + lift * np.exp(-((x - at) ** 2))
    return global_envelope(observed, simulated, x, name=name)


def three(*, lift: float = 0.0, at: float = 4.0) -> dict[str, Envelope]:
    """The tests that are judged together, all with the same departure."""
    names = ("vmr_by_side", "l_function", "nearest_neighbour", "pair_correlation")
    return {name: envelope(name, lift=lift, at=at, seed=k) for k, name in enumerate(names)}
