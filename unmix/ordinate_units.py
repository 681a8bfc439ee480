"""What the numbers of a spectrum are: an ordinate unit as written in files, and the conversion to the data contract.

The header decides; the values are only used to contradict it. A text that is not understood is an error that quotes
it, and whoever reads files may then keep that text as the quantity, which the solvers refuse.
"""

import re
from dataclasses import dataclass

import numpy as np

from unmix.errors import UnitError
from unmix.kernels import FloatArray
from unmix.units import plain, split_per

#: spellings shown when an ordinate unit is not understood
ORDINATE_ACCEPTED = (
    "give absorbance, transmittance, '%T', reflectance, '%R', 'Kubelka-Munk', 'log epsilon', intensity, "
    "or an absorptivity such as 'L/(mol cm)'"
)

#: Fractions whose 90th percentile lies above this can only be percent
_SURELY_PERCENT = 2.0
#: percent data that never reach this may be fractions under the wrong heading
_MAYBE_FRACTION = 1.2

_PLAIN, _PERCENT, _LOG10, _KUBELKA_MUNK = "as they are", "percent", "decadic logarithms", "Kubelka-Munk values"


@dataclass(frozen=True)
class OrdinateUnit:
    """What an ordinate unit means.

    Attributes
    ----------
    quantity : str
        One of the contract's quantities.
    per : str
        For an absorptivity, the unit amount (and path unit, where it is not the centimetre); empty where unknown.
    form : str
        How the numbers are written.
    factor : float
        To the contract's unit, applied last.
    note : str
        What was assumed, if anything.
    """

    quantity: str
    per: str = ""
    form: str = _PLAIN
    factor: float = 1.0
    note: str = ""

    @property
    def is_plain(self) -> bool:
        """Whether the numbers are the contract's already."""
        return self.form == _PLAIN and self.factor == 1.0

    def convert(self, values: FloatArray) -> FloatArray:
        """Values in the contract's unit; Kubelka-Munk values become reflectance, logarithms their numbers."""
        if self.form == _PERCENT:
            return values / 100
        if self.form == _LOG10:
            with np.errstate(over="ignore"):
                return 10.0**values * self.factor
        if self.form == _KUBELKA_MUNK:
            # f = (1 - R)^2 / 2R solved for R in a form that does not cancel for large f
            with np.errstate(invalid="ignore"):
                return 1 / (1 + values + np.sqrt(values * (values + 2)))
        return values if self.factor == 1.0 else values * self.factor


_NAPIERIAN = 1 / np.log(10.0)
_TEXTS: dict[str, OrdinateUnit] = {
    **dict.fromkeys(
        ["absorbance", "abs", "abs.", "absorbance units", "absorbance unit", "optical density", "od", "o.d.", "a",
         "extinction", "extinktion", "absorbanz", "absorb", "absorbence", "absorption (od)", "decadic absorbance",
         "log(1/t)", "log10(1/t)", "-log(t)", "-log10(t)", "-log t", "-log10 t", "absorbance log(1/t)",
         "absorbance base 10"],
        OrdinateUnit("absorbance"),
    ),
    **dict.fromkeys(
        ["napierian absorbance", "naperian absorbance", "absorbance base e", "absorbance ln", "-ln(t)", "-ln t",
         "ln(1/t)"],
        OrdinateUnit("absorbance", factor=_NAPIERIAN),
    ),
    **dict.fromkeys(
        ["mau", "milliabsorbance", "absorbance mau"],
        OrdinateUnit("absorbance", factor=1e-3),
    ),
    **dict.fromkeys(
        ["log(1/r)", "log 1/r", "log10(1/r)", "log1/r", "-log(r)", "-log10(r)", "-log r", "absorbance log(1/r)",
         "apparent absorbance"],
        OrdinateUnit("absorbance", note="log(1/R) is taken as apparent absorbance"),
    ),
    **dict.fromkeys(
        ["transmittance", "transmission", "t", "transmittance fraction", "fraction transmittance", "trans"],
        OrdinateUnit("transmittance"),
    ),
    **dict.fromkeys(
        ["reflectance", "reflection", "r", "diffuse reflectance", "reflectance fraction", "relative reflectance"],
        OrdinateUnit("reflectance"),
    ),
    **dict.fromkeys(
        ["kubelka-munk", "kubelka munk", "kubelka-munk units", "km", "k-m", "f(r)", "kubelka-munk f(r)"],
        OrdinateUnit("reflectance", form=_KUBELKA_MUNK,
                     note="Kubelka-Munk values were converted to reflectance"),
    ),
    **dict.fromkeys(
        ["intensity", "raman intensity", "scattering intensity", "counts", "count", "cps", "counts/s", "photon counts",
         "arbitrary units", "arb. units", "arb units", "arbitrary", "relative intensity", "raman", "emission",
         "fluorescence", "single beam"],
        OrdinateUnit("intensity"),
    ),
    **dict.fromkeys(
        ["molar absorptivity", "molar extinction", "molar extinction coefficient", "molar absorption coefficient",
         "molar extinction coefficients", "epsilon", "eps", "\u03b5"],
        OrdinateUnit("absorptivity", "mol/L",
                     note="a molar absorptivity without unit is taken per mol/L and cm"),
    ),
    **dict.fromkeys(
        ["log epsilon", "log(epsilon)", "log eps", "log e", "lg e", "lg epsilon", "logarithm epsilon", "log \u03b5",
         "log(\u03b5)", "lg \u03b5", "log10(epsilon)", "log molar absorptivity", "log(molar absorptivity)"],
        OrdinateUnit("absorptivity", "mol/L", form=_LOG10,
                     note="log epsilon was converted to molar absorptivity per mol/L and cm"),
    ),
}  # fmt: skip


def ordinate_unit(text: str) -> OrdinateUnit:
    """Read what the numbers of a spectrum are, from the text of a header or an argument.

    Parameters
    ----------
    text : str
        Such as ``ABSORBANCE``, ``%T``, ``Kubelka-Munk``, ``(micromol/mol)-1m-1 (base 10)`` or ``M-1 cm-1``.

    Returns
    -------
    OrdinateUnit

    Raises
    ------
    UnitError
        When the text is not understood.

    Examples
    --------
    >>> ordinate_unit("% Transmittance").form
    'percent'
    >>> ordinate_unit("(micromol/mol)-1m-1 (base 10)").per
    'umol/mol m'
    """
    key = re.sub(r"[(\[]?\s*base[- ]?10\s*[)\]]?", "base 10", plain(text).replace("_", " "))
    key = re.sub(r"[(\[]?\s*base[- ]?e\s*[)\]]?", "base e", key).strip()
    key = re.sub(r"(^| )(percent|per cent|pct)( |$)", r"\1%\3", key).strip()
    found = _TEXTS.get(key)
    if found is None and "%" in key:
        found = _percent(key)
    if found is None and (inner := re.fullmatch(r"(.+?)\s*[(\[](.+?)[)\]]", key)):
        found = _named(*(part.strip() for part in inner.groups()))
    if found is None:
        found = _absorptivity(text)
    if found is None:
        raise UnitError(f"ordinate unit '{text}' is not understood", accepted=ORDINATE_ACCEPTED)
    return found


def _percent(key: str) -> OrdinateUnit | None:
    base = _TEXTS.get(re.sub(r"[()\[\]/,%]", " ", key).strip())
    if base is None or base.quantity not in ("transmittance", "reflectance") or base.form != _PLAIN:
        return None
    return OrdinateUnit(base.quantity, form=_PERCENT)


_ARBITRARY = ("", "-", "1", "a.u.", "au", "arb. units", "arb. u.")
#: what stands in brackets behind the name of a quantity and adds nothing to it
_EMPTY = {
    "absorbance": (*_ARBITRARY, "a", "abs", "od"),
    "transmittance": ("", "-", "1", "fraction", "t", "0-1"),
    "reflectance": ("", "-", "1", "fraction", "r", "0-1"),
    "intensity": (*_ARBITRARY, "counts", "cps"),
}


def _named(name: str, unit: str) -> OrdinateUnit | None:
    """``Absorbance (a.u.)`` and the like: the name decides where the unit adds nothing."""
    base = _TEXTS.get(name) if len(name) > 1 else None
    if base is None or base.quantity == "absorptivity":
        return None
    if base.quantity == "absorbance" and unit == "mau":
        return _TEXTS[unit]
    return base if unit in _EMPTY[base.quantity] else None


# Units of an absorptivity: text -> the unit as the result names it. Case tells molar (M) from metre (m).
_LENGTH = {"cm": "cm", "m": "m", "mm": "mm", "um": "um", "km": "km", "metre": "m", "meter": "m",
           "centimetre": "cm", "centimeter": "cm"}  # fmt: skip
_AMOUNT = {"mol": "mol", "mmol": "mmol", "umol": "umol", "nmol": "nmol", "mole": "mol", "moles": "mol",
           "micromol": "umol", "micromole": "umol", "micromoles": "umol", "millimol": "mmol", "nanomol": "nmol",
           "g": "g", "mg": "mg", "ug": "ug", "kg": "kg", "gram": "g", "ppm": "ppm", "ppb": "ppb",
           "fraction": "fraction"}  # fmt: skip
_VOLUME = {"l": "L", "litre": "L", "liter": "L", "ml": "mL", "ul": "uL", "dl": "dL", "dm": "dm"}
_MOLAR = {"M": "mol/L", "mM": "mmol/L", "uM": "umol/L", "nM": "nmol/L"}
_UNIT = re.compile(r"\s*(?:(?P<word>[A-Za-z\u00b5\u03bc]+)|(?P<one>1(?=\s*/))|(?P<open>\()|(?P<close>\))|(?P<over>/)|"
                   r"(?P<times>[*\u00b7. ]))(?:\^?\{?(?P<power>[-\u2212\u207b]?\d|\u207b\u00b9)\}?)?")  # fmt: skip


def _absorptivity(text: str) -> OrdinateUnit | None:
    """An absorptivity from its unit, such as ``L/(mol cm)``; None where the text is none."""
    unit, natural = _without_base(text)
    unit = re.sub(r"(?i)^\s*(molar )?(absorptivity|(extinction|absorption) coefficient|epsilon|\u03b5)\s*[,/]?\s*", "",
                  unit)  # fmt: skip
    powers = _powers(_unwrapped(unit.replace("_", " ").strip()))
    if powers is None:
        return None
    per = _per(powers)
    if per is None:
        return None
    return OrdinateUnit("absorptivity", per, factor=_NAPIERIAN if natural else 1.0,
                        note="an absorptivity to base e was converted to base 10" if natural else "")  # fmt: skip


def _without_base(text: str) -> tuple[str, bool]:
    natural = re.search(r"(?i)\bbase[- ]?e\b|\bnap(i?)erian\b", text) is not None
    return re.sub(r"(?i)[,;]?\s*[(\[]?\s*(base[- ]?(10|e)|nap(i?)erian|decadic)\s*[)\]]?", "", text).strip(), natural


def _unwrapped(unit: str) -> str:
    """Without a pair of brackets that encloses the whole text."""
    if unit[:1] not in ("(", "[") or unit[-1:] not in (")", "]"):
        return unit
    depth = 0
    for char in unit[:-1]:
        depth += (char in "([") - (char in ")]")
        if depth == 0:
            return unit
    return unit[1:-1]


def _powers(unit: str) -> dict[str, int] | None:
    """The unit as word -> power; None where it is no product of units. One level of brackets is enough here."""
    unit = re.sub(r"\bper\b", "/", unit).replace("\u00b9", "1").replace("\u207b", "-").replace("\u2212", "-")
    total: dict[str, int] = {}
    group: dict[str, int] | None = None
    side, group_side, at = 1, 1, 0
    while at < len(unit):
        match = _UNIT.match(unit, at)
        if not match or match.end() == at:
            return None
        at = match.end()
        power = int(match["power"] or 1)
        if match["word"]:
            into = total if group is None else group
            into[match["word"]] = into.get(match["word"], 0) + side * power
            side = 1 if group is None else side
        elif match["over"]:
            if side < 0 and group is None:
                return None
            side = -1
        elif match["open"]:
            if group is not None:
                return None
            group, group_side, side = {}, side, 1
        elif match["close"]:
            if group is None:
                return None
            for word, inner in group.items():
                total[word] = total.get(word, 0) + group_side * power * inner
            group, side = None, 1
    return total if group is None and total else None


def _per(powers: dict[str, int]) -> str | None:
    """The unit amount and path of an absorptivity with these powers; None where they are of another kind."""
    named: dict[str, int] = {}
    for word, power in powers.items():
        name = _unit_name(word, powers)
        if name is None:
            return None
        named[name] = named.get(name, 0) + power
    if named.get("dm") == 3:
        del named["dm"]
        named["L"] = named.get("L", 0) + 1
    named = {name: power for name, power in named.items() if power}
    lengths = [name for name in named if name in ("cm", "m", "mm", "um", "km")]
    if len(lengths) != 1:
        return None
    path = lengths[0]
    power = named.pop(path)
    if power == 2:  # area per amount: a volume per amount and path
        volume = "mL" if path == "cm" else f"{path}3"
        named[volume] = named.get(volume, 0) + 1
    elif power != -1:
        return None
    upper = [name for name, n in named.items() if n == -1]
    lower = [name for name, n in named.items() if n == 1]
    if len(upper) != 1 or len(lower) > 1 or len(upper) + len(lower) != len(named):
        return None
    amount = f"{upper[0]}/{lower[0]}" if lower else upper[0]
    if not lower and upper[0] not in (*_MOLAR.values(), "ppm", "ppb", "fraction"):
        return None
    return amount if path == "cm" else f"{amount} {path}"


def _unit_name(word: str, powers: dict[str, int]) -> str | None:
    word = word.replace("\u00b5", "u").replace("\u03bc", "u")
    if word == "M" and any(other.lower() in _AMOUNT for other in powers):
        return "m"  # an all-capitals text: the amount is named, so this M is the path
    if word in _MOLAR:
        return _MOLAR[word]
    low = word.lower()
    return _LENGTH.get(low) or _AMOUNT.get(low) or _VOLUME.get(low)


def settle(values: FloatArray, unit: OrdinateUnit, text: str) -> tuple[FloatArray, list[str]]:
    """Convert values as their header says, and say where the values contradict it.

    Parameters
    ----------
    values : ndarray
        As the file gives them, factors applied.
    unit : OrdinateUnit
        What the header says.
    text : str
        The header as it stands, for the notes.

    Returns
    -------
    values : ndarray
        In the contract's unit.
    notes : list of str
        One sentence for everything assumed or contradicted. Fractions of which a tenth or more lie above 2 cannot
        be transmittances or reflectances; they are taken as percent, and a note says so.
    """
    notes = [unit.note] if unit.note else []
    if unit.quantity not in ("transmittance", "reflectance") or unit.form == _KUBELKA_MUNK:
        return unit.convert(values), notes
    known = values[np.isfinite(values)]
    if not known.size:
        return unit.convert(values), notes
    top = float(known.max())
    if unit.form == _PERCENT:
        if top <= _MAYBE_FRACTION:
            notes.append(f"the header says '{text}' but no value exceeds {top:.4g}; taken as percent as it says, give "
                         f"quantity='{unit.quantity}' if these are fractions")  # fmt: skip
    elif top > _SURELY_PERCENT:
        if float(np.quantile(known, 0.9)) > _SURELY_PERCENT:
            notes.append(f"the header says '{text}', a fraction, but the values reach {top:.4g}; taken as percent")
            return values / 100, notes
        notes.append(f"the header says '{text}', a fraction, but some values reach {top:.4g}; taken as fractions")
    return unit.convert(values), notes


_WRITTEN = {"absorbance": "ABSORBANCE", "transmittance": "TRANSMITTANCE", "reflectance": "REFLECTANCE",
            "intensity": "ARBITRARY UNITS"}  # fmt: skip


def ordinate_text(quantity: str, per: str = "") -> str:
    """The ordinate unit to write into a file, which :func:`ordinate_unit` reads back.

    Examples
    --------
    >>> ordinate_text("absorptivity", "umol/mol m")
    '(umol/mol)-1 m-1 (base 10)'
    """
    if quantity != "absorptivity" or not per:
        return _WRITTEN.get(quantity, quantity)
    amount, path = split_per(per)
    return f"({amount})-1 {path or 'cm'}-1 (base 10)"
