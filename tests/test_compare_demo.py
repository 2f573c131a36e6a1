"""The second demo: a model run of the demo's sea that does not resolve what separates its pairs."""

import shutil
import tomllib

import numpy as np
import pytest
from scipy.integrate import quad

from regimes.cases import load_case
from regimes.compare import compare
from regimes.fixes import write_fixes
from regimes.synthetic import load_recipe, simulate
from regimes.units import KM
from tests.worlds import CASES


def test_the_model_has_the_spectrum_of_the_sea_cut_at_its_shortest_wave():
    sea, model = (
        tomllib.loads((CASES / name / "recipe.toml").read_text(encoding="utf-8"))["fourier"]
        for name in ("merrowe-sea", "merrowe-model")
    )
    knee = 2 * np.pi / sea["break_wavelengths_km"][0]

    def spectrum(k):
        steep, flat = sea["spectral_slopes"]
        return (k / knee) ** -(steep if k > knee else flat)

    def energy(shortest):
        ends = 2 * np.pi / np.array([sea["longest_km"], shortest])
        inside = [k for k in (knee,) if ends[0] < k < ends[1]]
        return quad(spectrum, *ends, points=inside, limit=200)[0]

    share = energy(model["shortest_km"]) / energy(sea["shortest_km"])
    assert (model["speed_m_s"] / sea["speed_m_s"]) ** 2 == pytest.approx(share, abs=0.01)  # two printed digits
    assert model["longest_km"] == sea["longest_km"]
    assert model["spectral_slopes"] == sea["spectral_slopes"][1:]


@pytest.mark.slow
def test_the_demo_finds_the_model_too_slow_at_small_separations(tmp_path):
    folder = tmp_path / "merrowe-model"
    folder.mkdir()
    shutil.copy(CASES / "merrowe-model" / "case.toml", folder)
    write_fixes(simulate(load_recipe(CASES / "merrowe-model" / "recipe.toml")), folder / "fixes.parquet")
    found = compare(load_case(CASES / "merrowe-sea" / "case.toml"), load_case(folder / "case.toml"))
    assert found.same_flow == "different"
    exponent = next(c for c in found.ranks.curves if c.curve == "exponent")
    assert exponent.differs_at.min() < 2 * KM
    assert exponent.differs_at.max() < 100 * KM  # shortest wave of the model
    assert np.all(found.fitted.ratio[1, found.fitted.separation < 10 * KM] > 1.0)
    assert 20 * KM < found.fitted.plateau[0] < 120 * KM
