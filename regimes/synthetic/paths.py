"""Paths of the particles of a recipe: those of its world, and what is added to them."""

import numpy as np

from regimes.synthetic.contaminations import Instruments
from regimes.synthetic.fourier_flow import fourier_tracks
from regimes.synthetic.kernel_groups import release_tracks
from regimes.synthetic.linear_flow import convergence_displacement, shear_displacement
from regimes.synthetic.oscillation import oscillation
from regimes.synthetic.recipe import Recipe
from regimes.synthetic.shear_diffusion import shear_diffusion_tracks
from regimes.synthetic.worlds import FourierWorld, ShearDiffusionWorld
from regimes.units import DAY, HOUR, KM


def world_paths(recipe: Recipe, seed: int) -> np.ndarray:
    """Positions (n_release, n_member, n_fix, 2) about the moving centre of each release [m]."""
    size = (recipe.releases.number, recipe.releases.particles)
    options = (
        size,
        recipe.releases.start_separation_km * KM,
        recipe.records.fix_interval_h * HOUR,
        recipe.records.n_fix,
        seed,
    )
    world = recipe.world
    if isinstance(world, FourierWorld):
        tracks, _ = fourier_tracks(world.spectrum, *options)
    elif isinstance(world, ShearDiffusionWorld):
        tracks, _ = shear_diffusion_tracks(world.flow, *options)
    else:
        tracks, _ = release_tracks(world.kernel, *options)
    return tracks.position.reshape(*size, -1, 3)[..., :2]


def with_contaminations(recipe: Recipe, local: np.ndarray, rng: dict[str, np.random.Generator]) -> np.ndarray:
    """Paths of the world and what the recipe adds to them, start positions unchanged."""
    step = recipe.records.fix_interval_h * HOUR
    times = step * np.arange(local.shape[2])
    if recipe.instruments is not None:
        local = local + _slip(recipe.instruments, times, local.shape, rng["instruments"])
    if recipe.convergence is not None:
        made = recipe.convergence
        flow = (made.rate_per_d / DAY, made.direction_deg, made.lasts_d * DAY)
        local = local + convergence_displacement(local, step, *flow)
    if recipe.shear is not None:
        local = local + shear_displacement(local, step, recipe.shear.rate_per_d / DAY, recipe.shear.direction_deg)
    if recipe.oscillation is not None:
        made = recipe.oscillation
        wavelength = None if made.wavelength_km is None else made.wavelength_km * KM
        turn = made.angular_velocity(recipe.place.latitude)
        local = local + oscillation(local, times, made.speed_m_s, turn, wavelength, rng["oscillation"])
    return local


def _slip(made: Instruments, times: np.ndarray, shape: tuple[int, ...], rng: np.random.Generator) -> np.ndarray:
    """Displacements (n_release, n_member, n_fix, 2) of the particles of the second type, chosen at random [m]."""
    count = shape[0] * shape[1]
    slipping = np.zeros(count)
    slipping[rng.permutation(count)[: round(made.slip_share * count)]] = 1.0
    return slipping.reshape(*shape[:2], 1, 1) * (np.array(made.slip_m_s) * times[:, None])
