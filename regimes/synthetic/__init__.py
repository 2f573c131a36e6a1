"""Worlds of known truth: fixes and tracks made by flows whose separation kernel or spectrum is given."""

from regimes.synthetic.fourier_flow import fourier_release, fourier_tracks
from regimes.synthetic.kernel_flow import kernel_pairs
from regimes.synthetic.kernel_groups import release_tracks
from regimes.synthetic.recipe import Recipe, load_recipe, recipe_from
from regimes.synthetic.spectrum import Spectrum
from regimes.synthetic.survey import simulate
from regimes.synthetic.truth import truth

__all__ = [
    "Recipe",
    "Spectrum",
    "fourier_release",
    "fourier_tracks",
    "kernel_pairs",
    "load_recipe",
    "recipe_from",
    "release_tracks",
    "simulate",
    "truth",
]
