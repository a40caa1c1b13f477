"""Every registered earth model: what it declares against what its kernels do."""

from __future__ import annotations

import numpy as np
import pytest

from subside.errors import InputError
from subside.hooks.registry import registry

SOURCES = ("contraction", "closure", "vertical_force")
EXAMPLES = {"half-space": {"poisson_ratio": 0.25, "young_modulus": 1e10},
            "rigid-basement": {"poisson_ratio": 0.25, "young_modulus": 1e10,
                               "basement_depth": 3000.0}}
C = 1000.0


@pytest.fixture(params=sorted(registry.all("earth-model")))
def earth(request: pytest.FixtureRequest):
    return registry.all("earth-model")[request.param].cls(**EXAMPLES[request.param])


@pytest.mark.parametrize("source", SOURCES)
def test_gradient_is_the_derivative_of_displacement(earth, source: str) -> None:
    r, step = np.array([300.0, 900.0, 2500.0]), 0.5
    ahead = earth.displacement(source, r + step, 0.0, C)
    behind = earth.displacement(source, r - step, 0.0, C)
    here = earth.displacement(source, r, 0.0, C)
    by_radius, over_radius, down_by_radius = earth.gradient(source, r, 0.0, C)
    scale = np.abs(by_radius).max()
    assert by_radius == pytest.approx((ahead[0] - behind[0]) / (2 * step), abs=1e-5 * scale)
    assert over_radius == pytest.approx(here[0] / r, abs=1e-9 * scale)
    assert down_by_radius == pytest.approx((ahead[1] - behind[1]) / (2 * step), abs=1e-5 * scale)


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_declared_decay_is_the_decay(earth, source: str) -> None:
    """Subsidence falls off as radius**-p; the crack falls off faster than the nucleus."""
    r = np.array([100.0, 200.0]) * C
    down = np.abs(earth.displacement(source, r, 0.0, C)[1])
    if np.isinf(earth.far_field_power):
        assert (down < 1e-12 * earth.displacement(source, 0.0, 0.0, C)[1]).all()
    else:
        power = float(np.log2(down[0] / down[1]))
        expected = earth.far_field_power + (2.0 if source == "closure" else 0.0)
        assert power == pytest.approx(expected, abs=1e-3)


@pytest.mark.parametrize("source", ["contraction", "closure"])
def test_declared_volume_is_the_integral_of_the_kernel(earth, source: str) -> None:
    r = np.concatenate([[0.0], np.geomspace(1.0, 1e6 * C, 40_001)])
    down = earth.displacement(source, r, 0.0, C)[1]
    volume = float(np.trapezoid(2 * np.pi * r * down, r))
    assert volume == pytest.approx(float(earth.volume_ratio(source, np.array(C))), rel=1e-4)


def test_a_force_has_no_volume_and_nonsense_no_answer(earth) -> None:
    for source in ("vertical_force", "nonsense"):
        with pytest.raises(InputError):
            earth.volume_ratio(source, np.array(C))


def test_modulus_is_the_inverse_of_the_uniaxial_compressibility(earth) -> None:
    """Cm = (1+nu)(1-2nu)/((1-nu)E) (definition of uniaxial strain)."""
    assert earth.modulus_at(np.array([C]))[0] * (1.25 * 0.5 / (0.75 * 1e10)) == pytest.approx(1.0)
