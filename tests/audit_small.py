"""Small simulated surveys for the rows of the audit: quick to fit, and some that are odd in the ways surveys are."""

from dataclasses import replace
from functools import cache

import numpy as np

from regimes.audit import Subject, subject_of
from tests.audit_worlds import audited, recipe

RELEASES = {"number": 10, "interval_h": 60.0}


def small(seed: int, **changes: dict) -> dict:
    """The demo's recipe with ten releases of forty days and no losses; sections are merged key by key."""
    parts = {"releases": RELEASES, "records": {"duration_d": 40.0, "loss_per_d": 0.0}}
    for section, keys in changes.items():
        parts[section] = parts.get(section, {}) | keys
    return recipe(seed, **parts)


@cache
def clean() -> Subject:
    """A small clean survey."""
    return audited(small(5))


def on_plane(content: dict) -> dict:
    """The recipe without longitude and latitude."""
    place = {k: v for k, v in content["place"].items() if k not in ("longitude", "latitude")}
    return content | {"place": place}


@cache
def odd() -> dict[str, Subject]:
    """Surveys that a row must answer for all the same."""
    gappy = small(6, records={"gap_probability": 0.02, "gap_h": 8.0})
    short = small(7, records={"duration_d": 12.0, "fix_interval_h": 6.0})
    return {
        "few pairs": audited(small(8, releases={"number": 4}, records={"duration_d": 90.0})),
        "planar": audited(on_plane(small(9))),
        "gaps": audited(gappy),
        "short": audited(short, step=6 * 3600.0),
    }


def stated(subject: Subject, error: float) -> Subject:
    """The same survey with another stated position error."""
    return subject_of(replace(subject.tracks, position_error=error), subject.pairs, subject.options)


def scaled(subject: Subject, lengths: float) -> Subject:
    """A planar survey in another unit of length."""
    tracks = subject.tracks
    tracks = replace(tracks, position=tracks.position * lengths, position_error=tracks.position_error * lengths)
    pairs = replace(subject.pairs, start_separation=np.asarray(subject.pairs.start_separation) * lengths)
    return subject_of(tracks, pairs, subject.options)
