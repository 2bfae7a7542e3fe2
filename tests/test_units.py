"""Units and constants: against CODATA as scipy carries it, and the reading of quantities."""

import re

import pytest
import scipy.constants as codata
from hypothesis import given, settings
from hypothesis import strategies as st

from pairmc import units
from pairmc.units import QuantityError, Units, kind_in_words, parse_quantity


@pytest.mark.parametrize(
    ("ours", "name"),
    [
        (units.HBAR, "reduced Planck constant"),
        (units.BOLTZMANN, "Boltzmann constant"),
        (units.ELECTRONVOLT, "electron volt"),
        (units.BOHR, "Bohr radius"),
        (units.HARTREE, "Hartree energy"),
        (units.ELECTRON_MASS, "electron mass"),
        (units.ATOMIC_MASS, "atomic mass constant"),
    ],
)
def test_constants_are_codata_2022(ours: float, name: str) -> None:
    # scipy.constants carries the CODATA 2022 table from 1.15 on; its digits are what we wrote.
    assert ours == pytest.approx(codata.physical_constants[name][0], rel=1e-14)


def test_atomic_units_hang_together() -> None:
    # hartree = hbar^2/(m_e bohr^2), an identity between four of the constants (uncertainties 1e-10)
    kinetic = units.HBAR**2 / (units.ELECTRON_MASS * units.BOHR**2)
    assert kinetic == pytest.approx(units.HARTREE, rel=1e-9)


@pytest.mark.parametrize(
    ("text", "number", "unit", "value"),
    [
        ("1.1 / um^2", 1.1, "um^-2", 1.1e12),
        ("1.1 um^-2", 1.1, "um^-2", 1.1e12),
        ("1.1e12/m**2", 1.1e12, "m^-2", 1.1e12),
        ("1.1 / um / um", 1.1, "um^-2", 1.1e12),
        (" 1.1 * um ** -2 ", 1.1, "um^-2", 1.1e12),
        ("1.1 µm^-2", 1.1, "um^-2", 1.1e12),
        ("2 / bohr^3", 2.0, "bohr^-3", 2 / codata.physical_constants["Bohr radius"][0] ** 3),
        ("6.015 u", 6.015, "u", 6.015 * codata.atomic_mass),
        ("2 m_e", 2.0, "m_e", 2 * codata.electron_mass),
        ("5 g", 5.0, "g", 5e-3),
        ("0.2T_F", 0.2, "T_F", 0.2),
        ("40 nK", 40.0, "nK", 40e-9),
        ("90 deg", 90.0, "deg", 1.5707963267948966),
        ("2eV", 2.0, "eV", 2 * codata.electron_volt),
        ("3 mm", 3.0, "mm", 3e-3),
        ("3 micrometre", 3.0, "um", 3e-6),
        ("3 Å", 3.0, "angstrom", 3e-10),
        ("-.5e1", -5.0, "", -5.0),
        ("7", 7.0, "", 7.0),
    ],
)
def test_quantities_are_read(text: str, number: float, unit: str, value: float) -> None:
    quantity = parse_quantity(text)
    assert (quantity.number, quantity.unit) == (number, unit)
    assert quantity.value == pytest.approx(value, rel=1e-14)
    assert quantity.plain == (unit == "")
    assert quantity.written == text


@pytest.mark.parametrize(
    ("text", "kind", "words"),
    [
        ("1 / um^2", (("length", -2),), "a number per area"),
        ("1 bohr^3", (("length", 3),), "a volume"),
        ("1 u", (("mass", 1),), "a mass"),
        ("1 T_F", (("fermi_temperature", 1),), "a multiple of T_F"),
        ("1 eV", (("energy", 1),), "an energy"),
        ("1", (), "a plain number"),
        ("1 kg / m^3", (("length", -3), ("mass", 1)), "of the kind length^-3 mass^1"),
        ("1 / um^4", (("length", -4),), "of the kind length^-4"),
    ],
)
def test_the_kind_is_known(text: str, kind: tuple[tuple[str, int], ...], words: str) -> None:
    assert parse_quantity(text).kind == kind
    assert kind_in_words(kind) == words


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("", "write one number and its unit"),
        ("nan", "write one number and its unit"),
        ("inf um", "write one number and its unit"),
        ("um^-2", "write one number and its unit"),
        ("1 / (um um)", "write one number and its unit"),
        ("1 / um^2 kg", "write one number and its unit"),
        ("1 um 2", "write one number and its unit"),
        ("2 * 3 um", "write one number and its unit"),
        ("1 um^0", "write one number and its unit"),
        ("1 um^2.5", "write one number and its unit"),
        ("1,1 um", "write one number and its unit"),
        ("٣ um", "write one number and its unit"),
        ("1 " + "um " * 60, "write one number and its unit"),
        ("1e999 um", "the number is too large"),
        ("1 um nm", "keep to one length unit, um or nm"),
        ("1 m^2 / um^4", "keep to one length unit, m or um"),
        ("1 um / um", "the unit um cancels"),
        ("3 ums", '"ums" is no unit known here'),
        ("2 h", '"h" is no unit known here'),
        ("2 kK", '"kK" is no unit known here'),
    ],
)
def test_anything_else_is_refused(text: str, reason: str) -> None:
    with pytest.raises(QuantityError, match=re.escape(reason)):
        parse_quantity(text)


@pytest.mark.parametrize(
    ("text", "near"), [("1 UM", "um"), ("1 NK", "nK"), ("1 Hartree", "hartree")]
)
def test_the_nearest_unit_is_named(text: str, near: str) -> None:
    with pytest.raises(QuantityError, match=rf"did you mean {near}\?"):
        parse_quantity(text)


@settings(deadline=None, max_examples=300)
@given(st.text(alphabet="0123456789.eE+-*/^ um_TFkgµ()\n", max_size=20) | st.text(max_size=20))
def test_any_text_is_read_or_refused(text: str) -> None:
    try:
        quantity = parse_quantity(text)
    except QuantityError:
        return
    assert quantity.number == float(re.match(r"\s*[-+0-9.]+([eE][+-]?[0-9]+)?", text)[0])  # type: ignore[index]


def test_udunits_know_every_length() -> None:
    assert Units("um", 1e-6).udunits(-2) == "um^-2"
    assert Units("um", 1e-6).udunits(1) == "um"
    assert Units("bohr", units.BOHR).udunits(1) == "5.29177210544e-11 m"
    assert Units("bohr", units.BOHR).udunits(-3) == "(5.29177210544e-11 m)^-3"
    assert Units().udunits(1) == "1"
    assert Units("um", 1e-6).udunits(0) == "1"
