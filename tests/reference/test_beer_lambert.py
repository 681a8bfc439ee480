"""Worked examples of simultaneous spectrophotometric determination, through the public functions.

Each case says where its inputs and its printed answer come from and how well either is known: *found* (seen in a
stored copy of the source), *from memory* (the book was not at hand; the numbers were checked against each other) or
*computed* (no printed answer; solved with numpy 2.4 and R 4.2, which agree). The pass mark is every digit printed,
or the number of digits stated with the reason. Absorptivities are molar, per cm; the path is 1 cm unless said.
"""

from dataclasses import dataclass

import numpy as np
import pytest

import unmix
from unmix.spectra import make_spectra


@dataclass(frozen=True)
class Example:
    """One problem: absorptivities as (component, wavelength), and what it must give."""

    source: str
    components: tuple
    wavelengths: tuple
    absorptivity: tuple
    absorbance: tuple
    printed: tuple  # as text; "" where the source prints none or its digits do not follow from its inputs
    computed: tuple  # six digits or more
    path: float = 1.0


EXAMPLES = {
    "iron and copper": Example(
        "Harvey, Analytical Chemistry 2.0, ex. 10.6; absorbances found, absorptivities and answer from memory; iron "
        "is printed as 1.80e-5, its inputs give 1.79e-5: two digits",
        ("Fe", "Cu"), (550, 396), ((9970, 84), (34, 856)), (0.183, 0.109), ("1.8e-05", "1.26e-04"),
        (1.792682e-5, 1.255773e-4)),
    "chromium and cobalt": Example(
        "Harvey, Analytical Chemistry 2.0, practice exercise 10.6; inputs found, answer from memory",
        ("Cr", "Co"), (400, 505), ((15.2, 0.533), (5.60, 5.07)), (0.336, 0.187), ("8.86e-03", "3.60e-02"),
        (8.859713e-3, 3.595222e-2)),
    "cobalt and nickel 1": Example(
        "Skoog, West, Holler and Crouch, Fundamentals of Analytical Chemistry, 9th ed., problem 26-17, after Mukhedkar "
        "and Deshpande, Anal. Chem. 35 (1963) 47; inputs found, answers to odd parts from memory",
        ("Co", "Ni"), (365, 700), ((3529, 428.9), (3228, 0)), (0.617, 0.0235), ("5.48e-05", "1.31e-04"),
        (5.479133e-5, 1.312396e-4)),
    "cobalt and nickel 2": Example(
        "same problem, part without a printed answer", ("Co", "Ni"), (365, 700), ((3529, 428.9), (3228, 0)),
        (0.755, 0.0714), ("", ""), (1.664724e-4, 5.189560e-5)),
    "cobalt and nickel 3": Example(
        "same problem", ("Co", "Ni"), (365, 700), ((3529, 428.9), (3228, 0)), (0.920, 0.0945),
        ("2.20e-04", "4.41e-05"), (2.203311e-4, 4.412999e-5)),
    "cobalt and nickel 4": Example(
        "same problem, part without a printed answer", ("Co", "Ni"), (365, 700), ((3529, 428.9), (3228, 0)),
        (0.592, 0.0147), ("", ""), (3.427372e-5, 1.459257e-4)),
    "cobalt and nickel 5": Example(
        "same problem", ("Co", "Ni"), (365, 700), ((3529, 428.9), (3228, 0)), (0.685, 0.0540),
        ("1.26e-04", "7.46e-05"), (1.259035e-4, 7.456216e-5)),
    "dichromate and permanganate": Example(
        "worked example of a tutoring site, inputs and answer found; it rounds the absorptivity 2375 to 2380, two "
        "and three digits", ("Cr2O7", "MnO4"), (440, 545), ((374, 9), (95, 2380)), (0.405, 0.712),
        ("1.0e-03", "2.95e-04"), (1.007866e-3, 2.953484e-4)),
    "nickel and cobalt, nearly collinear": Example(
        "worked example of the same site, inputs and answer found; two digits", ("Ni", "Co"), (500, 400),
        ((10, 5000), (1000, 5000)), (0.091, 0.615), ("3.2e-05", "9.1e-05"), (3.232323e-5, 9.067677e-5)),
    "nickel and cobalt in 2 cm": Example(
        "solution in a chemistry forum, inputs and answer found; cobalt is printed as 1.47e-6, its inputs give 1.46e-6",
        ("Ni", "Co"), (328, 368), ((35210, 21820), (3910, 14340)), (0.67, 0.45), ("9.35e-06", ""),
        (9.352228e-6, 1.459859e-6), 2.0),
    "cobalt and nickel, quinoxalinedithiolates": Example(
        "answer of a homework site to a textbook problem, inputs and concentrations found (its mass fractions err)",
        ("Co", "Ni"), (510, 656), ((36400, 1240), (5520, 17500)), (0.477, 0.219), ("1.13e-05", "1.17e-05"),
        (1.132835e-5, 1.171159e-5)),
    "chromium and manganese in steel": Example(
        "problem of a homework site, inputs found, no answer seen: computed; the blank (0.005, 0.008) is taken off",
        ("Cr2O7", "MnO4"), (440, 545), ((369, 11), (95, 2350)), (0.108, 1.296), ("", ""),
        (1.508824e-4, 5.507831e-4)),
    "copper alone": Example(
        "Harvey, EDTA complexes; 0.338 near 730 nm found, absorptivity from memory", ("Cu",), (732.0,), ((95.2,),),
        (0.338,), ("",), (3.550420e-3,)),
    "copper and cobalt": Example(
        "Harvey, EDTA complexes, from memory, computed", ("Cu", "Co"), (732.0, 462.9), ((95.2, 2.32), (2.11, 15.8)),
        (0.453, 0.107), ("", ""), (4.623351e-3, 6.093280e-3)),
    "copper, cobalt and nickel": Example(
        "Harvey, EDTA complexes; the problem found, its numbers and answers from memory", ("Cu", "Co", "Ni"),
        (732.0, 462.9, 378.7), ((95.2, 2.32, 7.73), (2.11, 15.8, 3.11), (3.03, 1.79, 13.5)), (0.423, 0.184, 0.291),
        ("3.69e-03", "9.14e-03", "1.73e-02"), (3.68888e-3, 9.13969e-3, 1.733781e-2)),
}  # fmt: skip


def in_order(example, rows):
    """Values and wavelengths by rising wavelength; the sources list them as they like."""
    order = np.argsort(example.wavelengths)
    return np.atleast_2d(np.asarray(rows, dtype=float))[:, order], np.asarray(example.wavelengths, dtype=float)[order]


def solved(example, **options):
    values, axis = in_order(example, example.absorptivity)
    pure = make_spectra(values, axis, dim="wavelength", quantity="absorptivity", leading="component",
                        labels=example.components, attrs={"per": "mol/L"})  # fmt: skip
    values, axis = in_order(example, example.absorbance)
    sample = make_spectra(values, axis, dim="wavelength", quantity="absorbance")
    return unmix.quantify(sample, pure, baseline=None, path_length=example.path, **options), pure


@pytest.mark.parametrize("name", EXAMPLES)
def test_printed_digits(name):
    example = EXAMPLES[name]
    found, _ = solved(example, noise=0.001)
    assert found.concentration.attrs["units"] == "mol/L"
    amounts = found.concentration.values[0]
    assert amounts == pytest.approx(example.computed, rel=1e-6)
    for amount, printed in zip(amounts, example.printed, strict=True):
        digits = len(printed.split("e")[0].replace(".", "")) - 1
        assert not printed or f"{amount:.{digits}e}" == printed


@pytest.mark.parametrize("name", EXAMPLES)
def test_uncertainty_is_that_of_the_absorbances(name):
    example = EXAMPLES[name]
    found, _ = solved(example, noise=0.001)
    a = np.array(example.absorptivity, dtype=float).T * example.path
    expected = 0.001 * np.linalg.norm(np.linalg.inv(a), axis=1)
    assert found.standard_uncertainty.values[0] == pytest.approx(expected, rel=1e-6)
    # without the noise nothing is left to judge it by, and no interval is made up
    bare, _ = solved(example)
    assert bare.concentration.values == pytest.approx(found.concentration.values)
    assert np.isnan(bare.upper.values).all()
    assert bare.verdict.values[0] != "supported"
    assert "give the noise level" in bare.reason.values[0]


# ---- more wavelengths than components

#: Harvey, Analytical Chemistry 2.1, chapter 10, problem 25(a), after Blanco et al., J. Chem. Educ. (1989): peroxide
#: complexes of titanium and vanadium, inputs found; standards of 63.1 and 96.4 ppm
TI_V_AXIS = (390.0, 430.0, 450.0, 470.0, 510.0)
TI_V = ((0.895, 0.884, 0.694, 0.481, 0.173), (0.326, 0.497, 0.528, 0.512, 0.374))
TI_V_MIXTURE = (0.651, 0.743, 0.665, 0.547, 0.314)


def ti_v(scale=(1.0, 1.0), per="fraction"):
    pure = np.array(TI_V) / np.array(scale)[:, None]
    known = make_spectra(pure, TI_V_AXIS, dim="wavelength", quantity="absorbance", leading="component",
                         labels=["Ti", "V"], attrs={"per": per})  # fmt: skip
    sample = make_spectra(TI_V_MIXTURE, TI_V_AXIS, dim="wavelength", quantity="absorbance")
    return unmix.quantify(sample, known, baseline=None)


def test_least_squares_of_five_wavelengths():
    # computed with R 4.2.2 (lm, nnls 1.4) and scipy 1.17, which agree to ten digits
    found = ti_v()
    assert found.concentration.values[0] == pytest.approx([0.5079156484, 0.5944416963], abs=5e-11)
    residual = [0.002627502, -0.001434956, -0.001358676, -0.001661575, 0.003809398]
    assert found.residual.values[0] == pytest.approx(residual, abs=5e-10)
    assert float((found.residual**2).sum()) == pytest.approx(2.808121305e-5, rel=1e-9)
    assert found.noise_level.values[0] == pytest.approx(3.05948e-3, rel=2e-6)
    assert found.standard_uncertainty.values[0] == pytest.approx([4.79646e-3, 7.19268e-3], rel=2e-6)
    # Student's t with three degrees of freedom, 3.182 in printed tables
    half = (found.upper - found.lower).values[0] / 2
    assert half == pytest.approx(3.18245 * np.array([4.79646e-3, 7.19268e-3]), rel=1e-5)


def test_least_squares_in_ppm():
    found = ti_v(scale=(63.1, 96.4), per="ppm")
    assert found.concentration.values[0] == pytest.approx([32.04948, 57.30418], rel=1e-6)
    # the book regresses ratios of absorbances and prints 31.5 and 58.5 ppm: other weights, 2% beside least squares
    assert found.concentration.values[0] == pytest.approx([31.5, 58.5], rel=0.025)
    assert np.abs(found.concentration.values[0] - [31.5, 58.5]).min() > 0.5


# ---- figures of merit

#: system -> sensitivity, selectivity, condition number of the scaled columns; computed, definitions of Lorber,
#: Anal. Chem. 58 (1986) 1167, and Belsley, Kuh and Welsch, Regression Diagnostics (1980)
MERIT = {
    "iron and copper": ((9958.81089, 855.683171), (0.99884227, 0.99884227), 1.04932009),
    "chromium and cobalt": ((9.80644853, 4.87063801), (0.64476480, 0.64476480), 2.73647229),
    "nickel and cobalt, nearly collinear": ((970.774869, 989.998020), (0.19415459, 0.19415459), 10.2030603),
    "cobalt and nickel, quinoxalinedithiolates": ((34340.9899, 17301.9196), (0.94288684, 0.94288684), 1.41386340),
}


@pytest.mark.parametrize("name", MERIT)
def test_figures_of_merit(name):
    sensitivity, selectivity, condition = MERIT[name]
    _, pure = solved(EXAMPLES[name], noise=0.001)
    found = unmix.conditioning(pure, baseline=None, noise=0.001)
    assert np.linalg.norm(found.net_signal.values, axis=1) == pytest.approx(sensitivity, rel=1e-8)
    assert found.selectivity.values == pytest.approx(selectivity, rel=1e-7)
    assert found.condition_index.values[-1] == pytest.approx(condition, rel=1e-8)
    assert found.variance_inflation.values == pytest.approx(1 / np.square(selectivity), rel=1e-7)
    # 3.3 sigma over sensitivity (IUPAC, Pure Appl. Chem. 78 (2006) 633), with 2 x 1.645 in place of 3.3
    assert found.detection_limit.values == pytest.approx(3.29 * 0.001 / np.array(sensitivity), rel=2e-4)


def test_figures_of_merit_of_titanium_and_vanadium():
    known = make_spectra(TI_V, TI_V_AXIS, dim="wavelength", quantity="absorbance", leading="component",
                         labels=["Ti", "V"], attrs={"per": "fraction"})  # fmt: skip
    found = unmix.conditioning(known, baseline=None)
    assert np.linalg.norm(found.net_signal.values, axis=1) == pytest.approx([0.637862224, 0.425359713], rel=1e-8)
    assert found.selectivity.values == pytest.approx([0.41828991] * 2, rel=1e-7)
    assert found.condition_index.values[-1] == pytest.approx(4.56217928, rel=1e-8)


# ---- published sets of coefficients that are each other's inverse


def test_chlorophyll_equations_follow_from_the_specific_coefficients():
    # Mackinney 1941, 80% acetone, L/(g cm): from memory, checked by the equations in mg/L that textbooks print as
    # 12.72, 2.59, 22.88, 4.67. Arnon 1949 prints 2.69 for 2.59, a slip that does not follow from them.
    pure = make_spectra([[16.75, 82.04], [45.60, 9.27]], [645, 663], dim="wavelength", quantity="absorptivity",
                        leading="component", labels=["a", "b"], attrs={"per": "g/L"})  # fmt: skip
    units = make_spectra(np.eye(2), [645, 663], dim="wavelength", quantity="absorbance")
    found = unmix.quantify(units, pure, baseline=None, nonnegative=False, noise=0.001, path_length=1)
    at_645, at_663 = 1000 * found.concentration.values
    factors = [at_663[0], -at_645[0], at_645[1], -at_663[1]]
    assert [f"{value:.2f}" for value in factors] == ["12.72", "2.59", "22.88", "4.67"]
    assert -at_645[0] != pytest.approx(2.69, abs=0.05)


def test_trichromatic_chlorophyll_coefficients():
    # Jeffrey and Humphrey 1975, 90% acetone, mg/L: from memory; their inverse must give the published specific
    # coefficients a 87.67 at 664, b 51.36 at 647 and c 42.6 at 630 nm (three to four digits)
    equations = np.array([[-0.08, -1.54, 11.85], [-2.66, 21.03, -5.43], [24.52, -7.60, -1.67]]) / 1000
    pure = make_spectra(np.linalg.inv(equations).T, [630, 647, 664], dim="wavelength", quantity="absorptivity",
                        leading="component", labels=["a", "b", "c"], attrs={"per": "g/L"})  # fmt: skip
    assert [pure.values[0, 2], pure.values[1, 1], pure.values[2, 0]] == pytest.approx([87.67, 51.36, 42.6], rel=1e-3)
    sample = make_spectra([0.10, 0.12, 0.30], [630, 647, 664], dim="wavelength", quantity="absorbance")
    found = unmix.quantify(sample, pure, baseline=None, noise=0.001, path_length=1)
    assert found.concentration.values[0] == pytest.approx(equations @ [0.10, 0.12, 0.30], rel=1e-9)
