"""The picture of a pair correlation shows the numbers of the file, named and told apart."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.axes._base import _AxesBase
from matplotlib.colors import to_rgb
from matplotlib.container import ErrorbarContainer
from matplotlib.figure import Figure, SubFigure
from matplotlib.lines import Line2D
from matplotlib.patches import StepPatch
from matplotlib.text import Text
from matplotlib.transforms import Bbox

from pairmc.errors import InputError
from pairmc.figures.differences import merged_differences, whole_ticks
from pairmc.figures.draw import draw
from pairmc.figures.pair_correlation import MOST_PAIRS, in_words
from pairmc.statistics import t_quantile

UNITS = {
    "sheet": ("µm", "µm⁻²"),
    "electrons": ("bohr", "bohr⁻³"),
    "ring": ("length unit", "length unit⁻¹"),
    "polarised": ("µm", "µm⁻³"),
    "three": ("10⁻⁶ m", "10¹² m⁻²"),
    "open shell": ("µm", "µm⁻²"),
    "sparse": ("length unit", "length unit⁻³"),
}


def panels(dataset: xr.Dataset, panel: SubFigure) -> list[tuple[str, Axes, Axes]]:
    """Return pair, upper and lower axes of every pair, matched by the title above them."""
    axes = panel.get_axes()
    named = {one.get_title().replace("\n", ""): one for one in axes if one.get_title()}
    below = [one for one in axes if one.get_xlabel() and not one.get_title()]
    found = []
    for label in dataset["pair"].values:
        upper = named[str(label)]
        x0 = upper.get_position().x0
        under = [
            one
            for one in below
            if abs(one.get_position().x0 - x0) < 1e-6
            and one.get_position().y1 <= upper.get_position().y0
        ]
        found.append((str(label), upper, max(under, key=lambda one: one.get_position().y1)))
    return found


def errorbar(axes: Axes) -> ErrorbarContainer:
    """Return the one container of error bars."""
    (container,) = (one for one in axes.containers if isinstance(one, ErrorbarContainer))
    return container


def steps(axes: Axes, label: str) -> StepPatch:
    """Return the stepped curve of this label."""
    (curve,) = (one for one in axes.patches if one.get_label() == label)
    assert isinstance(curve, StepPatch)
    return curve


def luminance(colour: object) -> float:
    """Return the luminance of a colour, 0 black to 1 white (weights of ITU-R BT.601)."""
    return float(np.dot(to_rgb(colour), (0.299, 0.587, 0.114)))  # type: ignore[arg-type]


def test_points_and_bars_are_the_values_and_intervals_of_the_file(
    result: xr.Dataset, figure: Figure
) -> None:
    for label, upper, _ in panels(result, figure.subfigs[0]):
        part = result.sel(pair=label)
        line, _, (bars,) = errorbar(upper)
        np.testing.assert_array_equal(line.get_xdata(), part["separation"])
        np.testing.assert_array_equal(line.get_ydata(), part["pair_correlation"])
        ends = np.array([segment[:, 1] for segment in bars.get_segments()])
        np.testing.assert_allclose(ends, part["pair_correlation_interval"], atol=1e-12)
        assert np.all(ends[:, 1] - ends[:, 0] > 0.0)


def test_curves_are_the_expectations_of_the_file(result: xr.Dataset, figure: Figure) -> None:
    for label, upper, _ in panels(result, figure.subfigs[0]):
        part = result.sel(pair=label)
        for name, variable in (("exact", "expected"), ("infinite", "bulk")):
            values, edges, _ = steps(upper, name).get_data()
            np.testing.assert_array_equal(values, part[f"pair_correlation_{variable}"])
            np.testing.assert_array_equal(edges[:-1], part["separation_bounds"][:, 0])
            np.testing.assert_array_equal(edges[1:], part["separation_bounds"][:, 1])


def test_the_right_scale_is_the_exchange_hole_and_the_top_scale_k_f_r(
    result: xr.Dataset, figure: Figure
) -> None:
    for label, upper, _ in panels(result, figure.subfigs[0]):
        part = result.sel(pair=label)
        right = next(one for one in upper.child_axes if not one.get_xlabel())
        top = next(one for one in upper.child_axes if one.get_xlabel())
        low, high = upper.get_ylim()
        place = (part["pair_correlation"] - low) / (high - low)
        bottom, ceiling = right.get_ylim()
        hole = bottom + place * (ceiling - bottom)
        np.testing.assert_allclose(hole, part["exchange_hole"], rtol=1e-9, atol=1e-9 * abs(bottom))
        ratio = top.get_xlim()[1] / upper.get_xlim()[1]
        np.testing.assert_allclose(ratio * part["separation"], part["scaled_separation"])


def test_differences_are_those_of_the_file_within_the_band(
    result: xr.Dataset, figure: Figure
) -> None:
    for label, upper, lower in panels(result, figure.subfigs[0]):
        part = result.sel(pair=label)
        band = next(one for one in lower.patches if not isinstance(one, StepPatch))
        height = band.get_extents().transformed(lower.transData.inverted())
        limit = t_quantile(0.95, result.sizes["batch"])
        np.testing.assert_allclose([height.y0, height.y1], [-limit, limit])
        known = part["pair_correlation_merge"].values >= 0
        if not known.any():
            assert [text.get_text() for text in lower.texts] == ["too few pairs"]
            continue
        line, _, (widths,) = errorbar(lower)
        shown = np.asarray(line.get_ydata())
        numbers = part["pair_correlation_merge"].values[known]
        assert len(shown) == len(np.unique(numbers))
        expected = part["pair_correlation_difference"].values[known]
        np.testing.assert_array_equal(shown[numbers - numbers.min()], expected)
        ends = np.array([segment[:, 0] for segment in widths.get_segments()])
        np.testing.assert_allclose(ends[1:, 0], ends[:-1, 1])
        assert np.isclose(ends[-1, 1], upper.get_xlim()[1])
        assert np.all(np.abs(shown) < lower.get_ylim()[1])


def test_the_infinite_system_is_weighed_as_the_merged_bins_are(result: xr.Dataset) -> None:
    same = result.copy(deep=True)
    same["pair_correlation_bulk"] = same["pair_correlation_expected"]
    for index in range(result.sizes["pair"]):
        infinite = merged_differences(same, index)[3]
        np.testing.assert_allclose(infinite, 0.0, atol=1e-9)


def test_a_difference_without_bound_is_marked_at_the_edge(results: dict[str, xr.Dataset]) -> None:
    changed = results["sheet"].copy(deep=True)
    merge = changed["pair_correlation_merge"].values
    changed["pair_correlation_difference"].values[merge == 2] = np.inf
    figure = draw([changed])
    (_, _, lower), *_ = panels(changed, figure.subfigs[0])
    crosses = [one for one in lower.lines if one.get_marker() == "x" and len(one.get_xdata())]
    assert len(crosses) == 1
    assert 0.0 < np.asarray(crosses[0].get_ydata())[0] < lower.get_ylim()[1]


def test_no_point_is_hidden(result: xr.Dataset, figure: Figure) -> None:
    for label, upper, _ in panels(result, figure.subfigs[0]):
        part = result.sel(pair=label)
        low, high = upper.get_ylim()
        assert low < min(0.0, float(result["pair_correlation_interval"].min()))
        above = part["separation"].values[part["pair_correlation"].values > high]
        marked = [one for one in upper.lines if one.get_label() == "above"]
        places = np.concatenate([np.asarray(one.get_xdata()) for one in marked] or [[]])
        np.testing.assert_array_equal(places, above)
        assert np.all(part["pair_correlation"] > low)


def test_the_sparse_run_has_points_above_its_panels_and_says_so(
    results: dict[str, xr.Dataset],
) -> None:
    figure = draw([results["sparse"]])
    (legend,) = figure.subfigs[0].legends
    assert "above the panel" in [text.get_text() for text in legend.get_texts()]


@pytest.mark.parametrize("name", UNITS)
def test_every_axis_is_named_with_its_unit(results: dict[str, xr.Dataset], name: str) -> None:
    length, density = UNITS[name]
    (panel,) = draw([results[name]]).subfigs
    shown = panels(results[name], panel)
    for label, upper, lower in shown:
        assert lower.get_xlabel() == f"separation $r$ ({length})"
        top = next(one for one in upper.child_axes if one.get_xlabel())
        assert top.get_xlabel().startswith(r"$k_\mathrm{F} r$")
        if len(results[name]["spin"]) > 1:
            assert top.get_xlabel().endswith(f"of {results[name]['spin'].values[0]})")
        assert upper.get_title().replace("\n", "") == label
    (_, upper, lower), *_ = shown
    assert upper.get_ylabel() == "pair correlation $g$"
    assert lower.get_ylabel() == "difference /\nstandard error"
    right = next(one for one in shown[-1][1].child_axes if not one.get_xlabel())
    assert right.get_ylabel() == f"exchange hole ({density})"


def test_tick_numbers_are_the_values_less_the_power_of_ten(results: dict[str, xr.Dataset]) -> None:
    figure = draw([results["three"]])
    (_, upper, lower), *_ = panels(results["three"], figure.subfigs[0])
    right = next(one for one in upper.child_axes if not one.get_xlabel())
    for axis, exponent in ((lower.xaxis, -6), (right.yaxis, 12), (upper.yaxis, 0)):
        texts = [text.get_text().replace("−", "-") for text in axis.get_ticklabels()]
        assert len(texts) >= 3
        values = np.array([float(text) for text in texts]) * 10.0**exponent
        np.testing.assert_allclose(values, axis.get_majorticklocs(), atol=1e-9 * 10.0**exponent)


@pytest.mark.parametrize("reach", [3.6, 4.3, 9.9, 24.0, 26.0, 1e3, 3.7e6])
def test_standard_errors_are_counted_in_whole_numbers(reach: float) -> None:
    ticks = whole_ticks(reach)
    np.testing.assert_array_equal(ticks, np.round(ticks))
    np.testing.assert_array_equal(ticks, -ticks[::-1])
    assert 3 <= len(ticks) <= 5
    assert ticks[-1] <= 0.85 * reach


def test_the_legend_names_all_that_is_drawn(results: dict[str, xr.Dataset]) -> None:
    (legend,) = draw([results["sheet"]]).subfigs[0].legends
    assert [text.get_text() for text in legend.get_texts()] == [
        "sampled, 95 % interval",
        "exact, this finite system",
        "infinite system",
        "95 % band of differences",
    ]
    assert legend.get_title().get_text().replace("\n", " ") == in_words(results["sheet"])


@pytest.mark.parametrize(
    ("p", "words"),
    [
        (1.0, "against the exact values: p > 0.999, no sign of disagreement."),
        (0.998, "p = 0.998, no sign of disagreement."),
        (0.37, "p = 0.370, no sign of disagreement."),
        (0.004, "p = 0.004, a sign of disagreement, rarely chance."),
        (3e-7, "p = 3.0e-07, sample and exact values disagree."),
        (0.0, "p < 1e-300, sample and exact values disagree."),
        (np.nan, "Too few snapshots for a test of all bins together against the exact values."),
    ],
)
def test_the_global_test_in_words(results: dict[str, xr.Dataset], p: float, words: str) -> None:
    changed = results["sheet"].assign(pair_correlation_p_value=p)
    assert in_words(changed).endswith(words)
    assert "agrees" not in in_words(changed)


def test_one_merged_bin_is_singular(results: dict[str, xr.Dataset]) -> None:
    one = results["sheet"].isel(pair_correlation_merged_bin=[0])
    assert in_words(one).startswith("1 merged bin against")


def test_what_is_drawn_is_told_apart_without_colour(results: dict[str, xr.Dataset]) -> None:
    shown = panels(results["sheet"], draw([results["sheet"]]).subfigs[0])
    markers = {}
    for label, upper, lower in shown:
        exact, infinite = steps(upper, "exact"), steps(upper, "infinite")
        assert exact.get_linestyle() in ("-", "solid")
        assert infinite.get_linestyle() not in ("-", "solid")
        assert infinite.get_linewidth() > 2.0 * exact.get_linewidth()
        light = [luminance(curve.get_edgecolor()) for curve in (exact, infinite)]
        assert light[1] - light[0] > 0.5
        for axes in (upper, lower):
            line: Line2D = errorbar(axes)[0]
            assert line.get_linestyle() == "None"
            like = len(set(label.split("-"))) == 1
            look = line.get_marker(), luminance(line.get_markerfacecolor())
            assert markers.setdefault(like, look) == look
    assert markers[True][0] != markers[False][0]
    assert abs(markers[True][1] - markers[False][1]) > 0.5


def texts_of(figure: Figure) -> list[Text]:
    """Return all visible texts of a figure that say something."""
    found = figure.findobj(Text)
    return [one for one in found if isinstance(one, Text) and one.get_visible() and one.get_text()]


def beyond(axes: _AxesBase) -> list[Text]:
    """Return tick labels that lie beyond the limits of their axis and are not drawn."""
    hidden = []
    for axis in (axes.xaxis, axes.yaxis):
        low, high = sorted(axis.get_view_interval())
        room = 1e-9 * (high - low)
        for tick in [*axis.majorTicks, *axis.minorTicks]:
            if not low - room <= tick.get_loc() <= high + room:
                hidden += [tick.label1, tick.label2]
    return hidden


def check_texts(figure: Figure) -> None:
    """Hold all texts of a figure against its edges, the smallest size and one another."""
    axes = [one for one in figure.findobj(Axes) if isinstance(one, Axes)]
    secondary = [child for one in axes for child in one.child_axes]
    hidden = {id(text) for one in (*axes, *secondary) for text in beyond(one)}
    boxes: list[tuple[str, Bbox]] = []
    for text in texts_of(figure):
        if id(text) in hidden:
            continue
        assert text.get_fontsize() >= 7.0
        box = text.get_window_extent()
        assert box.x0 >= 0.0
        assert box.y0 >= 0.0
        assert box.x1 <= figure.bbox.x1, text
        assert box.y1 <= figure.bbox.y1, text
        boxes.append((text.get_text(), box))
    assert len(boxes) > 20
    for (one, first), (other, second) in combinations(boxes, 2):
        assert not first.overlaps(second), (one, other)


def test_no_text_is_cut_small_or_on_top_of_another(figure: Figure) -> None:
    check_texts(figure)


def test_pairs_can_be_chosen_and_too_many_are_refused(results: dict[str, xr.Dataset]) -> None:
    three = results["three"]
    chosen = three.sel(pair=["nearest-the_second_state"])
    assert [label for label, _, _ in panels(chosen, draw([chosen]).subfigs[0])] == [
        "nearest-the_second_state"
    ]
    crowd = three.isel(pair=[0] * (MOST_PAIRS + 1))
    with pytest.raises(InputError, match=r"result\.sel\(pair="):
        draw([crowd])
