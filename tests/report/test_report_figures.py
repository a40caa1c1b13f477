"""Figures: what they show, where, and that nothing covers anything."""

from __future__ import annotations

import itertools
import subprocess
import sys
from pathlib import Path

import numpy as np
import pandas as pd
import pytest
import xarray as xr
from bowls import bowl, survey
from matplotlib.axes import Axes
from matplotlib.dates import date2num
from matplotlib.figure import Figure
from matplotlib.text import Text

from subside.errors import InputError
from subside.report.figures import figure_bowl, figure_curves, made_from, save_figures
from subside.report.style import canvas


def zero() -> xr.Dataset:
    result = bowl()
    for name in ("subsidence", "compaction", "point_subsidence", "bowl_volume",
                 "region_compaction_volume"):
        result[name] = result[name] * 0.0
    return result


def points_only(count: int = 9) -> xr.Dataset:
    return bowl(points=count).drop_dims(["x", "y"])


def feet() -> xr.Dataset:
    return bowl(origin=(2_500_000.0, 7_000_000.0)).assign_attrs(xy_unit="US_survey_foot")


def long_words() -> xr.Dataset:
    result = bowl("two", points=25)
    names = np.array([f"benchmark {n} at the church" for n in range(25)])
    title = "A title with $dollars$, under_scores and much else, for the authority, revision 17"
    return result.assign_coords(point_name=("point", names)).assign_attrs(title=title)


def rising() -> xr.Dataset:
    result = bowl()
    for name in ("subsidence", "compaction", "point_subsidence", "bowl_volume",
                 "region_compaction_volume"):
        result[name] = -result[name]
    return result


def holed() -> xr.Dataset:
    result = bowl()
    result["subsidence"] = result["subsidence"].where(result["x"] > 515_000.0)
    return result


CASES = {
    "ellipse": bowl, "two lobes": lambda: bowl("two"), "ring": lambda: bowl("ring"),
    "faint ring": lambda: bowl("faint"), "points only": points_only,
    "one point": lambda: points_only(1), "map only": lambda: bowl().drop_dims("point"),
    "one date": lambda: bowl(years=1), "one row": lambda: bowl(ny=1), "zero": zero,
    "one column": lambda: bowl(nx=1), "one pixel": lambda: bowl(nx=1, ny=1),
    "negative coordinates": lambda: bowl(origin=(-9000.0, -4000.0), scale=30.0), "feet": feet,
    "long words": long_words, "many points": lambda: bowl(points=120), "rising": rising,
    "holed": holed, "tall": lambda: bowl(nx=40, ny=140), "micrometres": lambda: bowl(scale=3e-4),
}


def texts(figure: Figure) -> list[Text]:
    """Every text that is drawn; ticks beyond the limits exist but are not."""
    canvas(figure).draw()
    beyond = set()
    for axis in itertools.chain.from_iterable((a.xaxis, a.yaxis) for a in figure.axes):
        low, high = sorted(axis.get_view_interval())
        for tick in axis.get_major_ticks():
            if not low <= tick.get_loc() <= high or not axis.axes.axison:
                beyond |= {id(tick.label1), id(tick.label2)}
    return [text for text in figure.findobj(Text) if text.get_visible() and text.get_text().strip()
            and id(text) not in beyond]


def check_texts(figure: Figure) -> None:
    """No text covers another, and none leaves the figure."""
    shown = texts(figure)
    boxes = {id(t): t.get_window_extent() for t in shown}
    for text in shown:
        box = boxes[id(text)]
        assert box.x0 >= 0 and box.y0 >= 0, text.get_text()
        assert box.x1 <= figure.bbox.x1 and box.y1 <= figure.bbox.y1, text.get_text()
    for one, other in itertools.combinations(shown, 2):
        # The extent of a slanted contour label is its upright hull; a fifth of a line is allowed.
        a, b = boxes[id(one)], boxes[id(other)]
        wide = min(a.x1, b.x1) - max(a.x0, b.x0)
        high = min(a.y1, b.y1) - max(a.y0, b.y0)
        allowed = 0.2 * min(a.height, b.height, a.width, b.width)
        assert wide <= allowed or high <= allowed, (one.get_text(), other.get_text())


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize("case", CASES)
def test_every_kind_of_result_gives_a_tidy_map(case: str) -> None:
    check_texts(figure_bowl(CASES[case]()))


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize("case", CASES)
def test_every_kind_of_result_gives_tidy_curves(case: str) -> None:
    check_texts(figure_curves(CASES[case]()))


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize("kind", ["ellipse", "two", "ring"])
def test_curves_with_measured_values_are_tidy(kind: str) -> None:
    result = bowl(kind)
    check_texts(figure_curves(result, survey(result)))


# -- the map -----------------------------------------------------------------------------------


def marks(axes: Axes, marker: str) -> list[tuple[float, float]]:
    return [(float(line.get_xdata()[0]), float(line.get_ydata()[0])) for line in axes.get_lines()
            if line.get_marker() == marker]


def words(figure: Figure) -> str:
    return "\n".join(text.get_text() for text in texts(figure))


def test_the_deepest_pixel_is_marked_where_it_is() -> None:
    result = bowl("two")
    last = result["subsidence"].isel(time=-1)
    deepest = last.isel(last.argmax(["y", "x"]))
    figure = figure_bowl(result)
    assert marks(figure.axes[0], "v") == [(float(deepest["x"]), float(deepest["y"]))]
    assert f"deepest {float(deepest) * 1000:.0f} mm" in words(figure)


def test_the_map_is_north_up() -> None:
    # a bowl in the north-west quarter only: the filled bands must lie there
    result = bowl(nx=40, ny=40).isel(time=[-1])
    x, y = result["x"], result["y"]
    west, north = x < x.mean(), y > y.mean()
    result["subsidence"] = (result["subsidence"] * 0.0 + 0.1).where(west & north, 0.0)
    axes = figure_bowl(result.drop_vars(["compaction", "point_subsidence"])).axes[0]
    bands = axes.collections[0]  # the filled contours
    deep = bands.get_paths()[len(bands.get_paths()) // 2].get_extents()
    assert deep.x1 < float(x.mean()) + 250.0 and deep.y0 > float(y.mean()) - 250.0
    assert axes.get_ylim()[0] < axes.get_ylim()[1]
    edges = (512_000.0, 512_000.0 + 40 * 250.0)  # outer edges of the pixels
    assert axes.get_xlim() == pytest.approx(edges)


def test_the_date_is_that_of_the_largest_subsidence() -> None:
    result = bowl()
    result["subsidence"][-1] = 0.5 * result["subsidence"][-1]
    result["point_subsidence"][-1] = 0.5 * result["point_subsidence"][-1]
    assert "Subsidence on 2018-01-01 since 1990-01-01" in words(figure_bowl(result))
    assert "Subsidence on 2020-01-01" in words(figure_bowl(result, "2020-01-01"))
    with pytest.raises(InputError, match="no date 2019-05-05; it has 1990-01-01, 1992-01-01"):
        figure_bowl(result, "2019-05-05")
    with pytest.raises(InputError, match="'soon' is not a date"):
        figure_bowl(result, "soon")


def test_uplift_gets_its_own_colours_only_when_it_matters() -> None:
    with_ring, without = words(figure_bowl(bowl("ring"))), words(figure_bowl(bowl("faint")))
    assert "uplift negative" in with_ring and "largest uplift" in with_ring
    assert "uplift" not in without
    told = bowl()
    # the result knows of uplift that this map does not show: 6 % of the largest subsidence
    told["max_uplift"] = told["max_uplift"] + 0.06 * float(told["subsidence"].max())
    assert "uplift negative" in words(figure_bowl(told))


@pytest.mark.parametrize(("result", "length"), [
    (bowl(), "5 km"),  # 22.5 km wide: 24 % is 5.4 km
    (feet(), "1 km"),  # 22 500 US survey feet are 6.86 km: 24 % is 1.6 km
])
def test_the_scale_bar_is_true(result: xr.Dataset, length: str) -> None:
    figure = figure_bowl(result)
    assert length in words(figure)
    strip = figure.axes[-1]
    half = [p.get_width() for p in strip.patches if hasattr(p, "get_width")]
    axes = figure.axes[0]
    map_inches = axes.get_position().width * figure.get_size_inches()[0]
    metre = 1200 / 3937 if result.attrs["xy_unit"] == "US_survey_foot" else 1.0
    per_km = map_inches / ((axes.get_xlim()[1] - axes.get_xlim()[0]) * metre / 1000.0)
    assert sum(half) == pytest.approx(float(length.split()[0]) * per_km, rel=1e-9)


def test_names_stay_on_the_map() -> None:
    result = bowl(points=4)
    west, east = float(result["x"].min()), float(result["x"].max())
    south, north = float(result["y"].min()), float(result["y"].max())
    result["point_x"][:], result["point_y"][:] = [west, west, east, east], [south, north] * 2
    figure = figure_bowl(result)
    frame = figure.axes[0].get_window_extent()
    named = [t for t in texts(figure) if t.get_text().startswith("BM")]
    assert len(named) == 4
    for text in named:
        box = text.get_window_extent()
        assert frame.x0 <= box.x0 and box.x1 <= frame.x1, text.get_text()
        assert frame.y0 <= box.y0 and box.y1 <= frame.y1, text.get_text()


def test_points_off_the_map_are_counted() -> None:
    result = bowl()
    result["point_x"][0] = 0.0
    assert "1 off the map" in words(figure_bowl(result))


def test_nothing_to_draw_is_said() -> None:
    empty = bowl()[["bowl_volume"]]
    with pytest.raises(InputError, match="neither a map nor points"):
        figure_bowl(empty)
    with pytest.raises(InputError, match="no subsidence and no volume to draw"):
        figure_curves(empty.drop_vars("bowl_volume"))
    with pytest.raises(InputError, match="'furlong' is not a unit of maps"):
        figure_bowl(bowl().assign_attrs(xy_unit="furlong"))


# -- the curves --------------------------------------------------------------------------------


def test_measured_values_lie_where_they_were_measured() -> None:
    result = bowl(points=3)
    name = str(result["point_name"].values[1])
    rows = pd.DataFrame({"point": [name, name, "elsewhere"],
                         "date": pd.to_datetime(["2001-07-01", "2010-07-01", "2010-07-01"]),
                         "value_m": [0.031, 0.052, 0.1], "sigma_m": [0.002, 0.003, 0.1]})
    figure = figure_curves(result, rows)
    upper = figure.axes[0]
    points = [line for line in upper.get_lines() if len(line.get_xdata()) == 2
              and line.get_linestyle() == "None" and line.get_marker() not in ("_", "|")]
    (drawn,) = points
    np.testing.assert_allclose(drawn.get_ydata(), [31.0, 52.0])
    np.testing.assert_allclose(date2num(drawn.get_xdata()),
                               date2num(np.array(["2001-07-01", "2010-07-01"], "datetime64[D]")))
    bars = upper.containers[0].lines[2][0].get_segments()  # the vertical bars
    np.testing.assert_allclose([bar[:, 1] for bar in bars], [[29.0, 33.0], [49.0, 55.0]])
    assert upper.get_ylim()[0] > upper.get_ylim()[1]  # the ground goes down
    assert "1 surveyed points are not in the result" in words(figure)


def test_measured_points_come_before_those_that_move_more() -> None:
    result = bowl(points=30)
    least = result["point_subsidence"].isel(time=-1).argsort().values[:2]
    names = [str(result["point_name"].values[n]) for n in least]
    rows = pd.DataFrame({"point": names, "date": pd.to_datetime(["2010-01-01"] * 2),
                         "value_m": [0.001, 0.001], "sigma_m": [0.001, 0.001]})
    assert not set(names) & set(words(figure_curves(result)).split("\n"))
    assert set(names) <= set(words(figure_curves(result, rows)).split("\n"))


def test_a_survey_without_its_columns_is_refused() -> None:
    with pytest.raises(InputError, match="the survey has no column value_m, sigma_m"):
        figure_curves(bowl(), pd.DataFrame({"point": ["a"], "date": [pd.Timestamp("2000-01-01")]}))


# -- files -------------------------------------------------------------------------------------


def test_files_know_what_they_were_made_from(tmp_path: Path) -> None:
    files = save_figures(bowl(), tmp_path / "out" / "base", overwrite=False)
    assert files == [tmp_path / "out" / "base-map.png", tmp_path / "out" / "base-curves.png"]
    assert [made_from(file) for file in files] == ["heron-flats.toml"] * 2
    (tmp_path / "text.png").write_text("no picture")
    assert made_from(tmp_path / "text.png") is None
    assert made_from(tmp_path / "none.png") is None
    Figure().savefig(tmp_path / "other.png", metadata={"Source": "heron-flats.toml"})
    assert made_from(tmp_path / "other.png") is None


def test_figures_are_not_replaced_without_leave(tmp_path: Path) -> None:
    there = tmp_path / "base-curves.png"
    there.write_text("mine")
    with pytest.raises(InputError, match=r"base-curves\.png' already there"):
        save_figures(bowl(), tmp_path / "base", overwrite=False)
    assert [file.name for file in tmp_path.iterdir()] == ["base-curves.png"]
    save_figures(bowl(), tmp_path / "base", overwrite=True)
    assert made_from(there) == "heron-flats.toml"


def test_importing_is_light_and_no_pyplot_state_is_touched(tmp_path: Path) -> None:
    script = (
        "import sys\n"
        "import subside.report\n"
        "assert 'matplotlib' not in sys.modules\n"
        "from bowls import bowl\n"
        "from pathlib import Path\n"
        "from subside.report.figures import save_figures\n"
        "save_figures(bowl(years=2), Path(sys.argv[1]) / 'a', overwrite=False)\n"
        "assert 'matplotlib.pyplot' not in sys.modules\n"
    )
    done = subprocess.run(
        [sys.executable, "-c", f"import sys; sys.path[:0] = {sys.path!r}\n{script}", str(tmp_path)],
        capture_output=True, text=True, timeout=120)
    assert done.returncode == 0, done.stderr
