"""Colours, units and labels: properties, not tastes."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from subside.report import style
from subside.report.labels import spread
from subside.report.scale import Scale


def oklab(rgb: np.ndarray) -> np.ndarray:
    """sRGB to OKLab, the other way round than the code: inverse matrices, cube roots."""
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    # published forward matrices (Ottosson 2020), from memory; they invert those of the code
    cone = linear @ np.array([[0.4122214708, 0.2119034982, 0.0883024619],
                              [0.5363325363, 0.6806995451, 0.2817188376],
                              [0.0514459929, 0.1073969566, 0.6299787005]])
    return np.cbrt(cone) @ np.array([[0.2104542553, 1.9779984951, 0.0259040371],
                                     [0.7936177850, -2.4285922050, 0.7827717662],
                                     [-0.0040720468, 0.4505937099, -0.8086757660]])


def test_oklab_is_what_it_claims() -> None:
    grey = style._srgb(np.array([1.0, 0.5]), np.zeros(2), np.zeros(2))
    np.testing.assert_allclose(grey[0], 1.0, atol=1e-6)  # L = 1 without chroma is white
    assert np.ptp(grey[1]) < 1e-6  # no chroma, no colour
    back = oklab(style._srgb(np.array([0.6]), np.array([0.08]), np.array([240.0])))[0]
    np.testing.assert_allclose(back, [0.6, 0.08 * np.cos(np.radians(240)),
                                      0.08 * np.sin(np.radians(240))], atol=1e-6)


@pytest.mark.parametrize("arm", ["down", "up"])
def test_ramps_are_even_and_ordered_by_lightness(arm: str) -> None:
    ramp = style._DOWN if arm == "down" else style._UP
    lab = oklab(ramp)
    steps = np.sqrt((np.diff(lab, axis=0) ** 2).sum(axis=1))
    assert steps.std() < 0.1 * steps.mean()
    assert (np.diff(lab[:, 0]) < 0.0).all()  # read in grey, whatever the colour vision
    assert lab[0, 0] - lab[-1, 0] > 0.6


def test_zero_is_the_centre_of_the_diverging_ramp() -> None:
    ramp = style.diverging()
    light = oklab(np.asarray(ramp(np.linspace(0.0, 1.0, 101)))[:, :3])[:, 0]
    assert light.argmax() in (50, 51)
    np.testing.assert_allclose(light, light[::-1], atol=0.03)  # same movement, same strength
    scale = Scale.of(-0.03, 0.1, split=True)
    assert scale.levels[0] < 0.0 < scale.levels[-1] and 0.0 in scale.levels
    up, down = scale.shades[0], scale.shades[-1]
    assert up[0] > up[2] and down[2] > down[0]  # warm up, blue down
    # seen with any colour vision: lightness of the band of equal movement is equal
    equal = {round(abs(low + high)): [] for low, high in
             zip(scale.levels, scale.levels[1:], strict=False)}
    for shade, low, high in zip(scale.shades, scale.levels, scale.levels[1:], strict=False):
        equal[round(abs(low + high))].append(oklab(shade[None, :3])[0, 0])
    assert all(np.ptp(pair) < 0.03 for pair in equal.values())


def test_levels_hold_the_values_and_are_round() -> None:
    for low, high in ((0.0, 0.126), (-0.028, 0.126), (-0.1, 0.0), (0.0, 3e-5), (0.0, 7.9)):
        scale = Scale.of(low, high, split=low < 0.0)
        shown = np.array([low, high]) * scale.unit.per_si
        assert scale.levels[0] <= shown[0] and scale.levels[-1] >= shown[1]
        assert 3 <= scale.levels.size <= 14
        step = scale.step / 10.0 ** np.floor(np.log10(scale.step))
        assert round(step, 9) in (1.0, 2.0, 2.5, 5.0)


def test_noise_is_no_uplift() -> None:
    assert not Scale.of(-1e-12, 0.1, split=False).heaves
    faint = Scale.of(-0.004, 0.1, split=False)  # 4 %: below the 5 % for bands of its own
    assert faint.heaves and faint.levels[0] == 0.0
    assert not Scale.of(0.0, 0.0, split=False).moved


@pytest.mark.parametrize(("largest", "unit", "text"), [
    (0.126, "mm", "126 mm"), (0.00456, "mm", "4.56 mm"), (0.9, "cm", "90.0 cm"),
    (3.77, "m", "3.77 m"), (4e-5, "µm", "40.0 µm"),
])
def test_units_suit_the_size(largest: float, unit: str, text: str) -> None:
    chosen = style.length_unit(largest)
    assert chosen.name == unit
    assert chosen.text(largest) == text


@given(st.lists(st.floats(0.0, 1.0), min_size=1, max_size=12), st.floats(0.01, 0.2))
def test_spread_labels_keep_their_distance_and_order(wanted: list[float], gap: float) -> None:
    placed = spread(wanted, gap, 0.0, 1.0)
    room = min(gap, 1.0 / max(len(wanted) - 1, 1))
    order = np.argsort(wanted, kind="stable")
    lined = np.array(placed)[order]
    assert (np.diff(lined) >= room - 1e-9).all()
    assert lined.min() >= -1e-9 and lined.max() <= 1.0 + 1e-9


def test_spread_leaves_alone_what_has_room() -> None:
    assert spread([0.1, 0.9, 0.5], 0.2, 0.0, 1.0) == [0.1, 0.9, 0.5]
    # two at one place share the gap about it
    assert spread([0.5, 0.5], 0.2, 0.0, 1.0) == pytest.approx([0.4, 0.6])
