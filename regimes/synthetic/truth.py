"""What an analysis of a synthetic survey should find."""

from regimes.synthetic.recipe import Recipe
from regimes.synthetic.worlds import FourierWorld, ShearDiffusionWorld
from regimes.theory.regimes import REGIMES, kernel_exponent, spectral_slope
from regimes.units import KM


def truth(recipe: Recipe) -> dict[str, object]:
    """What an analysis of the survey should find.

    Returns
    -------
    dict
        ``world``; ``exponents`` of the kernel and ``spectral_slopes`` from small to large separations (slope
        None where the kernel implies none); for a kernel world also ``regimes`` (None where unnamed),
        ``transitions_km``, ``rate_per_d`` and ``reference_km``; for a Fourier world the range of its waves,
        outside which (and near whose ends) the exponents do not hold. A world of shear and diffusion has a
        direction and no kernel: its numbers alone. What a recipe adds to its world is not part of the truth.
    """
    world = recipe.world
    if isinstance(world, FourierWorld):
        return {
            "world": "fourier",
            "exponents": kernel_exponent(world.spectral_slopes).tolist(),
            "spectral_slopes": list(world.spectral_slopes),
            "break_wavelengths_km": list(world.break_wavelengths_km),
            "wavelengths_km": [world.shortest_km, world.longest_km],
        }
    if isinstance(world, ShearDiffusionWorld):
        return {
            "world": "shear_diffusion",
            "diffusivity_m2_s": world.diffusivity_m2_s,
            "rate_per_d": world.rate_per_d,
            "direction_deg": world.direction_deg,
        }
    kernel = world.kernel
    names = {regime.exponent: regime.name for regime in REGIMES.values()}
    return {
        "world": "kernel",
        "exponents": kernel.exponents.tolist(),
        "spectral_slopes": [float(spectral_slope(a)) if 1 < a < 2 else None for a in kernel.exponents],
        "regimes": [names.get(a) for a in kernel.exponents.tolist()],
        "transitions_km": (kernel.breaks / KM).tolist(),
        "rate_per_d": world.rate_per_d,
        "reference_km": world.reference_km,
    }
