"""Ordinate units as files write them: what each means, and that nothing else is taken for one."""

import numpy as np
import pytest

from unmix.errors import UnitError
from unmix.ordinate_units import ordinate_text, ordinate_unit, settle


@pytest.mark.parametrize(("text", "quantity", "value"), [
    ("ABSORBANCE", "absorbance", 0.5), ("Absorbance (a.u.)", "absorbance", 0.5), ("OD", "absorbance", 0.5),
    ("-log10(T)", "absorbance", 0.5), ("mAU", "absorbance", 0.0005), ("Absorbance (mAU)", "absorbance", 0.0005),
    ("Absorbance (base e)", "absorbance", 0.5 / np.log(10)), ("log(1/R)", "absorbance", 0.5),
    ("TRANSMITTANCE", "transmittance", 0.5), ("%T", "transmittance", 0.005),
    ("% Transmittance", "transmittance", 0.005),
    ("Transmittance (%)", "transmittance", 0.005), ("PERCENT TRANSMITTANCE", "transmittance", 0.005),
    ("T [%]", "transmittance", 0.005), ("Transmission / %", "transmittance", 0.005), ("%R", "reflectance", 0.005),
    ("REFLECTANCE", "reflectance", 0.5), ("Reflectance (%)", "reflectance", 0.005),
    ("Raman intensity", "intensity", 0.5),
    ("ARBITRARY UNITS", "intensity", 0.5), ("Intensity (a.u.)", "intensity", 0.5), ("Counts", "intensity", 0.5),
])  # fmt: skip
def test_quantities(text, quantity, value):
    unit = ordinate_unit(text)
    assert unit.quantity == quantity
    assert unit.convert(np.array([0.5]))[0] == pytest.approx(value, rel=1e-14)
    assert unit.per == ""


@pytest.mark.parametrize(("text", "per"), [
    ("(micromol/mol)-1m-1 (base 10)", "umol/mol m"), ("(MICROMOL/MOL)-1M-1 (BASE 10)", "umol/mol m"),
    ("(g/L)-1 cm-1 (base 10)", "g/L"), ("L/(mol cm)", "mol/L"), ("M-1 cm-1", "mol/L"), ("M⁻¹ cm⁻¹", "mol/L"),
    ("L mol^-1 cm^-1", "mol/L"), ("L·mol-1·cm-1", "mol/L"), ("dm3 mol-1 cm-1", "mol/L"), ("1/(M cm)", "mol/L"),
    ("cm-1/M", "mol/L"), ("cm-1_per_M", "mol/L"), ("mM-1 cm-1", "mmol/L"), ("mL/(mg cm)", "mg/mL"), ("L/(g*cm)", "g/L"),
    ("cm2/mol", "mol/mL"), ("m2/mol", "mol/m3 m"), ("(ppm m)-1", "ppm m"), ("ppm-1 m-1", "ppm m"),
    ("Molar absorptivity (L/(mol cm))", "mol/L"), ("epsilon / M-1 cm-1", "mol/L"), ("molar absorptivity", "mol/L"),
    ("[L/(mol cm)]", "mol/L"),
])  # fmt: skip
def test_absorptivities(text, per):
    unit = ordinate_unit(text)
    assert (unit.quantity, unit.per) == ("absorptivity", per)
    assert unit.convert(np.array([2.0]))[0] == 2.0


def test_conversions():
    assert ordinate_unit("log epsilon").convert(np.array([4.0]))[0] == 10_000
    natural = ordinate_unit("(g/L)-1 cm-1 (base e)")
    assert natural.per == "g/L"
    assert natural.convert(np.array([np.log(10)]))[0] == pytest.approx(1)
    reflectance = np.array([1.0, 0.9, 0.3, 1e-3])
    kubelka_munk = (1 - reflectance) ** 2 / (2 * reflectance)
    np.testing.assert_allclose(ordinate_unit("Kubelka-Munk").convert(kubelka_munk), reflectance, rtol=1e-12)


@pytest.mark.parametrize("text", [
    "", "glow", "a.u.", "nm", "cm-1", "m", "M", "g/L", "mol", "L/mol", "cm", "dB", "ratio %", "% of batch", "HbO2", "1",
    "L/(mol cm", "L/mol)cm", "cm-2/M", "M-1 cm-1 s-1", "((L))/((mol cm))", "R (A)", "-", "(", "())", "counts per hour",
])  # fmt: skip
def test_what_is_no_ordinate_unit(text):
    with pytest.raises(UnitError, match="is not understood; give absorbance, transmittance, '%T'"):
        ordinate_unit(text)


@pytest.mark.parametrize(("quantity", "per"), [
    ("absorbance", ""), ("transmittance", ""), ("reflectance", ""), ("intensity", ""), ("absorptivity", "g/L"),
    ("absorptivity", "mol/L"), ("absorptivity", "umol/mol m"), ("absorptivity", "ppm m"), ("absorptivity", "mg/mL"),
])  # fmt: skip
def test_what_is_written_is_read(quantity, per):
    unit = ordinate_unit(ordinate_text(quantity, per))
    assert (unit.quantity, unit.per, unit.is_plain) == (quantity, per, True)


def test_data_may_contradict_the_header():
    fraction, percent = ordinate_unit("TRANSMITTANCE"), ordinate_unit("%T")
    spread = np.linspace(0.01, 0.99, 50)
    assert settle(spread, fraction, "T")[1] == []
    assert settle(100 * spread, percent, "%T")[1] == []
    values, notes = settle(100 * spread, fraction, "T")
    np.testing.assert_allclose(values, spread)
    assert "taken as percent" in notes[0]
    values, notes = settle(spread, percent, "%T")
    np.testing.assert_allclose(values, spread / 100)
    assert "no value exceeds 0.99" in notes[0]
    spiked = np.append(spread, 40.0)
    values, notes = settle(spiked, fraction, "T")
    assert values[-1] == 40
    assert "some values reach 40; taken as fractions" in notes[0]
    assert settle(np.full(3, np.nan), fraction, "T")[1] == []
