"""Pictures are drawn and saved whole, the same each time, and in known formats only."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import matplotlib
import numpy as np
import pytest
import xarray as xr
from matplotlib import image

from pairmc.errors import InputError
from pairmc.figures.draw import (
    BEGINNINGS,
    METADATA,
    MOST_RESULTS,
    draw,
    picture_format,
    plot,
    save,
)
from pairmc.figures.style import SETTINGS, unit_in_words, wrap
from pairmc.physics.observables import registry


@pytest.mark.parametrize("kind", METADATA)
def test_a_picture_is_of_the_kind_that_its_suffix_says(
    results: dict[str, xr.Dataset], tmp_path: Path, kind: str
) -> None:
    path = tmp_path / f"ring.{kind.upper()}"
    save(draw([results["ring"]]), path)
    assert path.read_bytes().startswith({"png": b"\x89PNG", "pdf": b"%PDF", "svg": b"<?xml"}[kind])
    assert list(tmp_path.iterdir()) == [path]


@pytest.mark.parametrize("kind", METADATA)
def test_equal_input_gives_equal_bytes(
    results: dict[str, xr.Dataset], tmp_path: Path, kind: str
) -> None:
    figure = draw([results["ring"]])
    first, again, anew = (tmp_path / f"{name}.{kind}" for name in ("first", "again", "anew"))
    save(figure, first)
    save(figure, again)
    with matplotlib.rc_context({"font.size": 20.0, "lines.linewidth": 5.0, "svg.hashsalt": None}):
        save(draw([results["ring"]]), anew)
    assert first.read_bytes() == again.read_bytes() == anew.read_bytes()


def test_other_input_gives_other_bytes(results: dict[str, xr.Dataset], tmp_path: Path) -> None:
    changed = results["ring"].copy(deep=True)
    changed["pair_correlation"][0, 10] += 0.1
    save(draw([results["ring"]]), tmp_path / "one.png")
    save(draw([changed]), tmp_path / "other.png")
    assert (tmp_path / "one.png").read_bytes() != (tmp_path / "other.png").read_bytes()


def test_a_picture_has_its_size_on_paper(results: dict[str, xr.Dataset], tmp_path: Path) -> None:
    save(draw([results["ring"]]), tmp_path / "ring.png")
    save(draw([results["sheet"]]), tmp_path / "sheet.png")
    widths = [image.imread(tmp_path / f"{name}.png").shape[1] for name in ("ring", "sheet")]
    dots = np.array([85.0, 170.0]) / 25.4 * SETTINGS["savefig.dpi"]
    np.testing.assert_allclose(widths, dots, atol=1.0)


def test_the_settings_of_the_user_come_back(results: dict[str, xr.Dataset]) -> None:
    with matplotlib.rc_context({"font.size": 20.0}):
        draw([results["ring"]])
        assert matplotlib.rcParams["font.size"] == 20.0


@pytest.mark.parametrize("name", ["sheet.jpeg", "sheet", "sheet.png.txt"])
def test_an_unknown_suffix_is_refused_with_those_allowed(
    results: dict[str, xr.Dataset], tmp_path: Path, name: str
) -> None:
    with pytest.raises(InputError) as caught:
        save(draw([results["ring"]]), tmp_path / name)
    assert caught.value.problems[0].allowed == ".png, .pdf, .svg"
    assert list(tmp_path.iterdir()) == []


def test_a_place_that_cannot_be_written_is_refused(tmp_path: Path) -> None:
    (tmp_path / "folder.png").mkdir()
    with pytest.raises(InputError, match="a folder"):
        picture_format(tmp_path / "folder.png")
    with pytest.raises(InputError, match="does not exist"):
        picture_format(tmp_path / "nowhere" / "sheet.png")


def test_nothing_is_left_half_written(
    results: dict[str, xr.Dataset], tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = tmp_path / "ring.png"
    older = BEGINNINGS["png"][0] + b"an older picture"
    path.write_bytes(older)
    figure = draw([results["ring"]])

    def fail(temporary: Path, **_: object) -> None:
        temporary.write_bytes(b"half a picture")
        raise OSError("the disk is full")

    monkeypatch.setattr(figure, "savefig", fail)
    with pytest.raises(OSError, match="full"):
        save(figure, path)
    assert list(tmp_path.iterdir()) == [path]
    assert path.read_bytes() == older


@pytest.mark.parametrize("kind", METADATA)
def test_only_an_older_picture_of_the_same_format_is_replaced(
    results: dict[str, xr.Dataset], tmp_path: Path, kind: str
) -> None:
    path, figure = tmp_path / f"ring.{kind}", draw([results["ring"]])
    path.touch()
    for _ in range(2):
        save(figure, path)
    picture = path.read_bytes()
    for other in METADATA:
        if other == kind:
            continue
        wrong = tmp_path / f"wrong.{other}"
        wrong.write_bytes(picture)
        with pytest.raises(InputError, match=f"is no {other.upper()} picture"):
            save(figure, wrong)
        assert wrong.read_bytes() == picture
        wrong.unlink()
    for contents in (b"a text", b"\x89HDF\r\n\x1a\n", b"<?xml version='1.0'?><html/>"):
        path.write_bytes(contents)
        with pytest.raises(InputError, match="new name"):
            picture_format(path)
        assert path.read_bytes() == contents
    assert list(tmp_path.iterdir()) == [path]


def test_a_result_that_is_drawn_is_not_replaced(small_result: Path, tmp_path: Path) -> None:
    result = tmp_path / "result.png"
    result.write_bytes(small_result.read_bytes())
    (tmp_path / "link.png").symlink_to(result)
    for name in ("result.png", "link.png"):
        with pytest.raises(InputError, match="a result that is to be drawn"):
            plot(result, tmp_path / name)
    assert result.read_bytes() == small_result.read_bytes()


def test_several_results_stand_below_one_another(results: dict[str, xr.Dataset]) -> None:
    figure = draw([results["sheet"], results["ring"]], names=["first.nc", "second.nc"])
    upper, lower = figure.subfigs
    assert [panel.get_suptitle() for panel in (upper, lower)] == ["first.nc", "second.nc"]
    assert upper.bbox.y0 >= lower.bbox.y1 - 1e-6


@pytest.mark.parametrize("count", [0, MOST_RESULTS + 1])
def test_no_results_and_too_many_are_refused(results: dict[str, xr.Dataset], count: int) -> None:
    with pytest.raises(InputError, match="several pictures") as caught:
        draw([results["ring"]] * count)
    assert str(MOST_RESULTS) in caught.value.problems[0].allowed


def test_names_must_be_as_many_as_results(results: dict[str, xr.Dataset]) -> None:
    with pytest.raises(InputError, match="one for each"):
        draw([results["ring"]], names=["one", "two"])


def test_a_dataset_without_observables_is_refused() -> None:
    with pytest.raises(InputError, match="pair_correlation"):
        draw([xr.Dataset()])


def test_plot_takes_one_result_or_several_and_refuses_before_drawing(
    results: dict[str, xr.Dataset], tmp_path: Path
) -> None:
    assert len(plot(results["ring"], tmp_path / "ring.png").subfigs) == 1
    assert (tmp_path / "ring.png").is_file()
    assert len(plot([results["ring"], results["ring"]]).subfigs) == 2
    with pytest.raises(InputError, match="suffix"):
        plot(xr.Dataset(), tmp_path / "ring.gif")


def test_plot_takes_paths_as_well(
    results: dict[str, xr.Dataset], small_result: Path, tmp_path: Path
) -> None:
    for given in (small_result, str(small_result)):
        (panel,) = plot(given).subfigs
        assert panel.get_suptitle() == "Small sheet"
    plot(str(small_result), str(tmp_path / "small.png"))
    assert (tmp_path / "small.png").is_file()
    assert len(plot([small_result, results["ring"], str(small_result)]).subfigs) == 3
    with pytest.raises(InputError, match="no such file"):
        plot("nowhere.nc")


def test_anything_else_is_refused_by_its_type(results: dict[str, xr.Dataset]) -> None:
    correlation = results["ring"]["pair_correlation"]
    for given, name in ((None, "NoneType"), (3, "int"), (b"a.nc", "bytes"), (correlation, "Data")):
        with pytest.raises(InputError, match=f"got a value of type {name}"):
            plot(given)  # type: ignore[arg-type]
        with pytest.raises(InputError, match=f"got a list with a value of type {name}"):
            plot([results["ring"], given])  # type: ignore[list-item]


def test_every_observable_can_be_drawn() -> None:
    for name in registry.NAMES:
        module = __import__(f"pairmc.figures.{name}", fromlist=["draw", "size"])
        assert callable(module.draw)
        assert callable(module.size)


def test_without_matplotlib_the_way_to_get_it_is_named(
    results: dict[str, xr.Dataset], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "matplotlib", None)
    with pytest.raises(InputError, match=r"pip install 'pairmc\[plot\]'"):
        draw([results["ring"]])


def test_a_broken_matplotlib_is_not_called_missing(
    results: dict[str, xr.Dataset], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(sys.modules, "matplotlib.figure", None)
    with pytest.raises(ModuleNotFoundError):
        draw([results["ring"]])


def test_drawing_opens_no_window_and_loads_matplotlib_late() -> None:
    program = (
        "import sys, pairmc.figures.draw as room; assert 'matplotlib' not in sys.modules;"
        "import pairmc.figures.pair_correlation; assert 'matplotlib.pyplot' not in sys.modules"
    )
    subprocess.run([sys.executable, "-c", program], check=True)


@pytest.mark.parametrize(
    ("unit", "power", "exponent", "words"),
    [
        ("um", 1, 0, "µm"),
        ("um", -2, 0, "µm⁻²"),
        ("bohr", -3, -5, "10⁻⁵ bohr⁻³"),
        ("", 1, 0, "length unit"),
        ("", -1, 3, "10³ length unit⁻¹"),
    ],
)
def test_units_in_print(unit: str, power: int, exponent: int, words: str) -> None:
    assert unit_in_words(unit, power, exponent) == words


def test_a_text_that_does_not_fit_is_cut_and_says_so() -> None:
    lines = wrap("word " * 200, 60.0, 8.0).split("\n")
    assert len(lines) == 3
    assert lines[-1].endswith("…")
    assert wrap("", 60.0, 8.0) == ""
    assert len(wrap("w" * 90, 60.0, 8.0).split("\n")) > 1
