"""Simulated surveys for the audit: the demo's sea, clean or with one contamination at a stated strength."""

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


def audited(content: dict, max_separation: float = 1000.0, kind: str = "launched", step: float = HOUR) -> Subject:
    """The subject of an audit from a recipe: simulated, read, paired."""
    tracks = make_tracks(simulate(recipe_from(content)), step, 3 * step)
    pairs = find_pairs(tracks, kind, max_separation, 6 * HOUR)
    return subject_of(tracks, pairs, Options(seed=content["seed"]))
