"""Simulated surveys for the audit: the demo's sea, clean or with one contamination at a stated strength."""

from dataclasses import replace

import numpy as np

from regimes.audit import Subject, subject_of
from regimes.fitting import Options
from regimes.pairs import find_pairs
from regimes.synthetic import recipe_from, simulate
from regimes.tracks import make_tracks
from regimes.units import HOUR
from tests.worlds import survey_recipe


def recipe(seed: int, **changes: dict) -> dict:
    """The demo's recipe with another seed; a section given is merged key by key into that of the recipe."""
    out = survey_recipe(seed)
    for section, keys in changes.items():
        out[section] = out.get(section, {}) | keys
    return out


def audited(
    content: dict,
    max_separation: float = 1000.0,
    kind: str = "launched",
    step: float = HOUR,
    stated_error: float | None = None,
    launches: int = 1,
) -> Subject:
    """The subject of an audit from a recipe: simulated, read, paired; the recipe's position error unless stated.

    With `launches` the particles of each release are told as so many releases of neighbours, which share its flow.
    """
    tracks = make_tracks(simulate(recipe_from(content)), step, 3 * step)
    if launches > 1:
        each = np.bincount(tracks.release)[tracks.release]
        number = np.arange(tracks.n_track) - np.searchsorted(tracks.release, tracks.release)
        tracks = replace(tracks, release=tracks.release * launches + number * launches // each)
    if stated_error is not None:
        tracks = replace(tracks, position_error=stated_error)
    pairs = find_pairs(tracks, kind, max_separation, 6 * HOUR)
    return subject_of(tracks, pairs, Options(seed=content["seed"]))
