"""Pictures of rotated spins and of singlets show the numbers of the file, named and told apart."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import xarray as xr
from matplotlib.axes import Axes
from matplotlib.collections import LineCollection
from matplotlib.colors import to_rgb
from matplotlib.container import ErrorbarContainer
from matplotlib.figure import Figure
from matplotlib.patches import StepPatch

import pairmc
from pairmc.cli.main import run as run_command
from pairmc.errors import InputError
from pairmc.figures import rotation, singlet_fraction
from pairmc.figures.differences import three_ticks
from pairmc.figures.draw import MOST_RESULTS, draw, plot
from pairmc.figures.views import MOST_ANGLES, VIEWS, angle_of, differ_only_in_rotation
from pairmc.results.sample import sample_into
from pairmc.runfile.read import read_run_text
from pairmc.runfile.run import RunFile
from pairmc.statistics import t_quantile
from tests.figures.conftest import GASES
from tests.figures.test_pair_correlation_figure import check_texts

ANGLES = (0, 30, 90)


def gas(up: int, down: int, degrees: float, more: str = "", bins: int = 40) -> RunFile:
    """Return a small run of a gas whose spins are rotated."""
    text = f"""
        title = "Spins of a thin sheet"
        gas = {{ dimension = 2, particles = {{ up = {up}, down = {down} }}, \
total_density = "0.9 / um^2" }}
        spin = {{ rotation = "{degrees} deg" }}
        sampling = {{ snapshots = 400, batches = 8{more} }}
        observables.pair_correlation.bins = {bins}
    """
    return read_run_text(text)


def rotated(*what: float, **more: Any) -> xr.Dataset:
    """Return the result of such a run."""
    return pairmc.sample(gas(*what, **more))


@pytest.fixture(scope="module")
def mixed() -> list[xr.Dataset]:
    """Return two unequal components at three angles."""
    return [rotated(9, 5, angle) for angle in ANGLES]


@pytest.fixture(scope="module")
def polarised() -> list[xr.Dataset]:
    """Return one component at two angles; at the smaller one a label is rare."""
    return [rotated(9, 0, angle) for angle in (20, 90)]


@pytest.fixture(scope="module")
def shown(mixed: list[xr.Dataset]) -> dict[str, list[Axes]]:
    """Return the axes of the unequal components; a test only looks at them."""
    return columns(together(mixed), len(mixed))


@pytest.fixture(scope="module")
def shown_polarised(polarised: list[xr.Dataset]) -> dict[str, list[Axes]]:
    """Return the axes of the one component; a test only looks at them."""
    return columns(together(polarised), len(polarised))


@pytest.fixture(scope="module")
def equal() -> xr.Dataset:
    """Return a state that rotations leave alone."""
    return rotated(9, 9, 90)


def together(datasets: Sequence[xr.Dataset]) -> Figure:
    """Return the picture of the pair correlation of several results."""
    return draw(datasets, show="pair-correlation")


def columns(figure: Figure, angles: int) -> dict[str, list[Axes]]:
    """Return the axes of each pair from above to below: g, and a strip for each angle."""
    (panel,) = figure.subfigs
    axes = panel.get_axes()
    found = {}
    for upper in (one for one in axes if one.get_title()):
        x0 = upper.get_position().x0
        under = [one for one in axes if abs(one.get_position().x0 - x0) < 1e-6]
        found[upper.get_title()] = sorted(under, key=lambda one: -one.get_position().y0)
        assert len(under) == 1 + angles
    return found


def bars(axes: Axes, label: str | None = None) -> ErrorbarContainer:
    """Return the error bars of this label, or the only ones."""
    (container,) = (
        one
        for one in axes.containers
        if isinstance(one, ErrorbarContainer) and label in (None, one.get_label())
    )
    return container


def ends(container: ErrorbarContainer) -> np.ndarray:
    """Return lower and upper ends of vertical bars (point, 2)."""
    (lines,) = container[2]
    assert isinstance(lines, LineCollection)
    return np.array([np.asarray(segment)[:, 1] for segment in lines.get_segments()])


def steps(axes: Axes, label: str) -> list[StepPatch]:
    """Return the stepped curves of this label."""
    return [one for one in axes.patches if isinstance(one, StepPatch) and one.get_label() == label]


def luminance(colour: object) -> float:
    """Return the luminance of a colour, 0 black to 1 white (weights of ITU-R BT.601)."""
    return float(np.dot(to_rgb(colour), (0.299, 0.587, 0.114)))  # type: ignore[arg-type]


class TestResultsThatAreShownTogether:
    def test_they_differ_in_the_angle(self, mixed: list[xr.Dataset]) -> None:
        assert [angle_of(dataset) for dataset in mixed] == list(ANGLES)
        assert differ_only_in_rotation(mixed)
        assert not differ_only_in_rotation(mixed[:1])
        assert not differ_only_in_rotation([mixed[1], mixed[1]])

    def test_and_in_how_they_were_drawn_but_in_nothing_else(self, mixed: list[xr.Dataset]) -> None:
        assert differ_only_in_rotation([mixed[0], rotated(9, 5, 30, more=", seed = 8")])
        for other in (
            rotated(5, 9, 30),  # in the same box
            mixed[1].isel(separation=slice(20)),
            rotated(9, 5, 30, bins=20),
            mixed[1].drop_attrs(),
            mixed[1].drop_vars("pair_correlation"),
        ):
            assert not differ_only_in_rotation([mixed[0], other])

    def test_others_have_a_panel_each(
        self, mixed: list[xr.Dataset], polarised: list[xr.Dataset]
    ) -> None:
        assert len(together([mixed[1], polarised[1]]).subfigs) == 2
        # the exchange hole has a scale for each density
        assert len(draw(mixed[:2]).subfigs) == 2


class TestPairCorrelationOfManyAngles:
    def test_points_bars_and_curves_are_those_of_the_files(
        self, mixed: list[xr.Dataset], shown: dict[str, list[Axes]]
    ) -> None:
        assert list(shown) == ["up-up", "up-down", "down-down"]
        for label, (upper, *_) in shown.items():
            seen: list[float] = []
            for angle, dataset in zip(ANGLES, mixed, strict=True):
                part = dataset.sel(pair=label)
                container = bars(upper, f"sampled, {angle}°")
                separation = np.asarray(container[0].get_xdata())
                turn = part.sel(separation=separation)
                np.testing.assert_array_equal(container[0].get_ydata(), turn["pair_correlation"])
                np.testing.assert_allclose(
                    ends(container), turn["pair_correlation_interval"], atol=1e-12
                )
                seen += separation.tolist()
                (exact,) = steps(upper, f"exact, {angle}°")
                values, edges, _ = exact.get_data()
                np.testing.assert_array_equal(values, part["pair_correlation_expected"])
                np.testing.assert_array_equal(edges[:-1], part["separation_bounds"][:, 0])
            assert set(seen) == set(mixed[0]["separation"].values)

    def test_the_infinite_system_is_drawn_wherever_it_is_another(
        self,
        mixed: list[xr.Dataset],
        shown: dict[str, list[Axes]],
        shown_polarised: dict[str, list[Axes]],
    ) -> None:
        for upper, *_ in shown.values():
            drawn = [curve.get_data().values for curve in steps(upper, "infinite")]
            label = upper.get_title()
            bulk = [one.sel(pair=label)["pair_correlation_bulk"].values for one in mixed]
            np.testing.assert_array_equal(drawn, bulk)
        for upper, *_ in shown_polarised.values():
            assert len(steps(upper, "infinite")) == 1

    def test_angles_that_take_turns_share_the_bins(
        self, polarised: list[xr.Dataset], shown_polarised: dict[str, list[Axes]]
    ) -> None:
        upper = shown_polarised["up-up"][0]
        places = [np.asarray(bars(upper, f"sampled, {a}°")[0].get_xdata()) for a in (20, 90)]
        assert not set(places[0]) & set(places[1])
        np.testing.assert_array_equal(np.sort(np.concatenate(places)), polarised[0]["separation"])
        assert "one bin in 2 of each angle" in rotation.in_words(polarised)

    def test_few_bins_are_all_drawn(self) -> None:
        few = [rotated(9, 5, angle, bins=20) for angle in (30, 60)]
        upper = columns(together(few), 2)["up-up"][0]
        for angle in (30, 60):
            assert len(np.asarray(bars(upper, f"sampled, {angle}°")[0].get_xdata())) == 20
        assert "in turn" not in rotation.in_words(few)

    def test_each_strip_holds_all_differences_of_one_angle(
        self, mixed: list[xr.Dataset], shown: dict[str, list[Axes]]
    ) -> None:
        for label, (_, *strips) in shown.items():
            for dataset, strip in zip(mixed, strips, strict=True):
                part = dataset.sel(pair=label)
                merge = part["pair_correlation_merge"].values
                first = np.unique(merge[merge >= 0], return_index=True)[1]
                expected = part["pair_correlation_difference"].values[merge >= 0][first]
                np.testing.assert_array_equal(bars(strip)[0].get_ydata(), expected)
                assert np.all(np.abs(expected) < strip.get_ylim()[1])
                band = next(one for one in strip.patches if not isinstance(one, StepPatch))
                height = band.get_extents().transformed(strip.transData.inverted())
                limit = t_quantile(0.95, 8)
                np.testing.assert_allclose([height.y0, height.y1], [-limit, limit])

    def test_angles_are_in_order_and_named(self, mixed: list[xr.Dataset]) -> None:
        shown = columns(together([mixed[2], mixed[0], mixed[1]]), len(mixed))
        legend = shown["up-up"][0].get_legend()
        assert legend is not None
        names = [text.get_text() for text in legend.get_texts()]
        assert [name.partition(" ")[0] for name in names] == ["0°", "30°", "90°"]
        for name, dataset in zip(names, mixed, strict=True):
            assert f"{float(dataset['pair_correlation_p_value']):.3f}" in name
        strips = shown["down-down"][1:]
        assert [strip.texts[-1].get_text() for strip in strips] == ["0°", "30°", "90°"]

    @pytest.mark.parametrize("reach", [3.6, 4.3, 4.7, 9.9, 17.7, 23.4, 1e3, 3.7e6])
    def test_strips_have_three_ticks_far_apart(self, reach: float) -> None:
        ticks = three_ticks(reach)
        np.testing.assert_array_equal(ticks, np.round(ticks))
        np.testing.assert_array_equal(ticks, [-ticks[2], 0.0, ticks[2]])
        assert 0.55 * reach < ticks[2] <= 0.85 * reach

    @pytest.mark.parametrize("angles", range(2, MOST_ANGLES + 1))
    def test_angles_are_told_apart_without_colour(self, angles: int) -> None:
        looks = rotation._looks(angles)
        assert len({look["marker"] for look in looks}) == angles
        light = np.array([luminance(look["color"]) for look in looks])
        assert np.all(np.diff(light) < -0.07)
        assert light[0] < 0.65

    def test_equivalent_pairs_are_drawn_once_and_that_is_said(
        self,
        mixed: list[xr.Dataset],
        polarised: list[xr.Dataset],
        shown_polarised: dict[str, list[Axes]],
    ) -> None:
        assert list(shown_polarised) == ["up-up", "up-down"]
        assert "g of down-down is that of up-up: not drawn" in rotation.in_words(polarised)
        assert "not drawn" not in rotation.in_words(mixed)

    def test_unlike_labels_of_a_polarised_gas_avoid_each_other(
        self, shown_polarised: dict[str, list[Axes]]
    ) -> None:
        upper = shown_polarised["up-down"][0]
        for angle in (20, 90):
            (exact,) = steps(upper, f"exact, {angle}°")
            assert exact.get_data().values[0] < 0.01

    def test_one_kind_of_pair_fits_a_column(self, mixed: list[xr.Dataset]) -> None:
        figure = together([dataset.sel(pair=["up-down"]) for dataset in mixed])
        assert list(columns(figure, 3)) == ["up-down"]
        assert figure.get_size_inches()[0] == pytest.approx(85.0 / 25.4)
        check_texts(figure)

    def test_points_above_the_panel_are_marked(self, mixed: list[xr.Dataset]) -> None:
        changed = mixed[1].copy(deep=True)
        changed["pair_correlation"].loc[{"pair": "up-up"}] = 7.0
        figure = together([mixed[0], changed])
        upper = columns(figure, 2)["up-up"][0]
        (marked,) = (one for one in upper.lines if one.get_label() == "above")
        np.testing.assert_array_equal(
            marked.get_xdata(), bars(upper, "sampled, 30°")[0].get_xdata()
        )
        (legend,) = figure.subfigs[0].legends
        assert "above the panel" in [text.get_text() for text in legend.get_texts()]

    def test_the_global_tests_in_words(self, mixed: list[xr.Dataset]) -> None:
        assert "no sign of disagreement at any angle." in rotation.in_words(
            [dataset.assign(pair_correlation_p_value=0.4) for dataset in mixed]
        )
        values = (1e-6, np.nan, 0.004)
        spoilt = [
            one.assign(pair_correlation_p_value=p) for one, p in zip(mixed, values, strict=True)
        ]
        said = rotation.in_words(spoilt)
        assert "sample and exact values disagree at 0°" in said
        assert "too few snapshots for a test at 30°" in said
        assert "a sign of disagreement, rarely chance at 90°" in said
        together(spoilt)

    def test_many_angles_fit_and_more_are_refused(self, mixed: list[xr.Dataset]) -> None:
        assert MOST_ANGLES > MOST_RESULTS
        assert len(rotation.MARKERS) == MOST_ANGLES
        many = [mixed[1].assign(rotation=10.0 * (1 + turn)) for turn in range(MOST_ANGLES + 1)]
        figure = together(many[:-1])
        assert len(columns(figure, MOST_ANGLES)) == 3
        check_texts(figure)
        with pytest.raises(InputError, match=f"1 to {MOST_ANGLES} in one picture"):
            together(many)

    def test_texts_are_apart(
        self, shown: dict[str, list[Axes]], shown_polarised: dict[str, list[Axes]]
    ) -> None:
        for axes in (shown["up-up"][0], shown_polarised["up-up"][0]):
            check_texts(axes.get_figure(root=True))

    def test_one_file_is_drawn_without_the_scale_of_the_hole(self, mixed: list[xr.Dataset]) -> None:
        hole, plain = draw(mixed[1:2]).subfigs[0], together(mixed[1:2]).subfigs[0]
        for panel, scales in ((hole, 2), (plain, 1)):
            uppers = [one for one in panel.get_axes() if one.get_title()]
            assert [len(one.child_axes) for one in uppers] == [scales] * 3


@pytest.mark.parametrize("name", ["mixed", "polarised"])
def test_the_hole_of_rotated_spins_has_the_detected_density(
    name: str, request: pytest.FixtureRequest
) -> None:
    dataset = request.getfixturevalue(name)[1]
    (panel,) = draw([dataset]).subfigs
    for upper in (one for one in panel.get_axes() if one.get_title()):
        part = dataset.sel(pair=upper.get_title())
        right = next(one for one in upper.child_axes if not one.get_xlabel())
        low, high = upper.get_ylim()
        bottom, top = right.get_ylim()
        hole = bottom + (part["pair_correlation"] - low) / (high - low) * (top - bottom)
        np.testing.assert_allclose(hole, part["exchange_hole"], rtol=1e-9, atol=1e-9 * abs(bottom))


class TestSingletFraction:
    def axes(self, dataset: xr.Dataset) -> Axes:
        (panel,) = draw([dataset], show="singlet-fraction").subfigs
        (axes,) = panel.get_axes()
        return axes

    def test_curves_are_the_expectations_of_the_file(
        self, equal: xr.Dataset, mixed: list[xr.Dataset]
    ) -> None:
        for dataset in (equal, *mixed):
            axes = self.axes(dataset)
            for name, variable in (
                ("exact, this finite system", "expected"),
                ("infinite system", "bulk"),
            ):
                (curve,) = steps(axes, name)
                values, edges, _ = curve.get_data()
                np.testing.assert_array_equal(values, dataset[f"singlet_fraction_{variable}"])
                np.testing.assert_array_equal(edges[1:], dataset["separation_bounds"][:, 1])
            assert axes.get_ylim()[0] < 0.0 < 1.0 < axes.get_ylim()[1]

    def test_points_have_intervals_of_95_percent(self, equal: xr.Dataset) -> None:
        axes = self.axes(equal)
        container = bars(axes)
        known = np.isfinite(equal["singlet_fraction"].values)
        value = equal["singlet_fraction"].values[known]
        np.testing.assert_array_equal(container[0].get_xdata(), equal["separation"][known])
        np.testing.assert_array_equal(container[0].get_ydata(), value)
        # Student's t with 7 degrees of freedom, 97.5 %: 2.364624 (printed tables, from memory)
        half = 2.364624 * equal["singlet_fraction_error"].values[known]
        np.testing.assert_allclose(ends(container), np.stack([value - half, value + half], -1))
        (legend,) = draw([equal], show="singlet-fraction").subfigs[0].legends
        assert [text.get_text() for text in legend.get_texts()] == [
            "sampled, 95 % interval",
            "exact, this finite system",
            "infinite system",
        ]
        assert legend.get_title().get_text() == ""

    def test_bins_without_an_estimate_are_left_out_and_low_points_seen(
        self, equal: xr.Dataset
    ) -> None:
        changed = equal.copy(deep=True)
        changed["singlet_fraction"].values[:3] = np.nan
        changed["singlet_fraction"].values[3] = -0.4
        axes = self.axes(changed)
        assert len(np.asarray(bars(axes)[0].get_xdata())) == changed.sizes["separation"] - 3
        assert axes.get_ylim()[0] < -0.4

    @pytest.mark.parametrize(
        ("up", "down", "far", "words"),
        [
            (9, 9, 0.25, "far apart: 1/4"),
            (9, 5, 45 / 196, r"$(1 - \zeta^2)/4$ = 0.23"),
            (9, 0, 0.0, r"$(1 - \zeta^2)/4$ = 0"),
        ],
    )
    def test_the_value_far_apart_is_drawn_and_named(
        self, up: int, down: int, far: float, words: str
    ) -> None:
        dataset = rotated(up, down, 90)
        axes = self.axes(dataset)
        (line,) = (one for one in axes.lines if list(one.get_xdata()) == [0, 1])
        np.testing.assert_allclose(line.get_ydata(), far, atol=1e-12)
        assert singlet_fraction.far_value(dataset) == pytest.approx(far)
        (text,) = axes.texts
        assert text.get_text().endswith(words)

    def test_why_there_is_no_estimate_is_said(self, mixed: list[xr.Dataset]) -> None:
        figure = draw([mixed[1]], show="singlet-fraction")
        assert not any(isinstance(one, ErrorbarContainer) for one in self.axes(mixed[1]).containers)
        (legend,) = figure.subfigs[0].legends
        said = mixed[1]["singlet_fraction_expected"].attrs["sampled_estimate"]
        assert said == "refused: the populations differ"
        assert legend.get_title().get_text() == (
            "No estimate from the sample: the populations differ."
        )

    def test_texts_are_apart(self, equal: xr.Dataset, mixed: list[xr.Dataset]) -> None:
        check_texts(draw([equal], show="singlet-fraction"))
        figure = draw([mixed[1], equal], show="singlet-fraction")
        assert len(figure.subfigs) == 2
        check_texts(figure)

    @pytest.mark.parametrize(
        ("name", "words"), [("ring", "1 component;"), ("three", "3 components;")]
    )
    def test_other_numbers_of_components_are_refused(
        self, results: dict[str, xr.Dataset], equal: xr.Dataset, name: str, words: str
    ) -> None:
        with pytest.raises(InputError, match=f"got a result of {words} allowed: a result of two"):
            draw([equal, results[name]], show="singlet-fraction")

    def test_an_older_result_is_refused(self, equal: xr.Dataset) -> None:
        older = equal.drop_vars(f"singlet_fraction{end}" for end in ("", "_expected", "_bulk"))
        with pytest.raises(InputError, match="sample the run again"):
            draw([older], names=["old.nc"], show="singlet-fraction")


def test_an_unknown_view_is_refused_with_those_there_are(equal: xr.Dataset) -> None:
    with pytest.raises(InputError, match="got 'singlets'") as caught:
        plot(equal, show="singlets")
    assert all(view in caught.value.problems[0].allowed for view in VIEWS)


def test_a_view_without_its_observable_is_refused() -> None:
    for view in VIEWS:
        with pytest.raises(InputError):
            draw([xr.Dataset()], show=view)


def test_the_command_shows_each_view(tmp_path: Path, capfd: pytest.CaptureFixture[str]) -> None:
    files: list[str] = []
    for run in (gas(9, 5, 0), gas(9, 5, 30), gas(9, 9, 90), read_run_text(GASES["ring"])):
        files.append(str(tmp_path / f"{len(files)}.nc"))
        sample_into(run, Path(files[-1]))
    one, other, singlets, ring = files

    def shown(view: str, *drawn: str) -> int:
        picture = str(tmp_path / f"{view}.png")
        return run_command(["plot", *drawn, "--show", view, "--into", picture])

    assert shown("pair-correlation", other, one) == 0
    assert shown("singlet-fraction", singlets) == 0
    assert shown("exchange-hole", one) == 0
    assert all((tmp_path / f"{view}.png").is_file() for view in VIEWS)
    (tmp_path / "singlet-fraction.png").unlink()
    capfd.readouterr()
    assert shown("singlet-fraction", ring) == 2
    assert "got a result of 1 component" in capfd.readouterr().err
    assert shown("singlets", singlets) == 2
    assert "pair-correlation" in capfd.readouterr().err
    assert not (tmp_path / "singlet-fraction.png").exists()
