"""A method: the steps of a preparation, and how amounts are then found, in a file that a person can read and write.

The same method is applied to samples and pure spectra. What the steps do is known to ``prepare``; what the settings
of a solver mean is known to ``solve``.
"""

import inspect
import os
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Self

import numpy as np
import xarray as xr
from sklearn.base import clone

from unmix import prepare
from unmix.errors import InputError, ReadError, listed, suggestion
from unmix.files import whole_file
from unmix.methodfile import MethodText, parse, table_text
from unmix.prepare.additivity import require_additive
from unmix.prepare.step import Step
from unmix.read import read
from unmix.spectra import check_spectra, make_spectra, spectral_dim

#: of the file format; a file of a later version is refused
VERSION = 1

#: what a method may hand the prepared spectra to
SOLVERS = ("quantify", "identify", "resolve", "calibrate")

_TABLES = ("unmix_method", "name", "step", "solver")


@dataclass(frozen=True)
class Method:
    """Steps in order, and the solver with its settings.

    Parameters
    ----------
    steps : sequence of Step
        Not changed by use: they are cloned before they are fitted.
    name : str
        For people.
    solver : str
        One of ``quantify``, ``identify``, ``resolve``, ``calibrate``; empty for preparation alone.
    settings : mapping
        Options of the solver by name; they are checked by the solver.

    Raises
    ------
    InputError
        For something that is no step, or an unknown solver.

    Examples
    --------
    >>> from unmix.prepare import Regions, SavitzkyGolay
    >>> method = Method([Regions(keep=[(800, 1800)]), SavitzkyGolay(window=9, derivative=1)], name="solvents")
    >>> print(method.to_text())
    unmix_method = 1
    name = "solvents"
    <BLANKLINE>
    [[step]]
    use = "Regions"
    keep = [[800, 1800]]
    <BLANKLINE>
    [[step]]
    use = "SavitzkyGolay"
    window = 9
    order = 2
    derivative = 1
    <BLANKLINE>
    >>> Method.from_text(method.to_text()).steps[1]
    SavitzkyGolay(derivative=1, window=9)
    """

    steps: Sequence[Step] = ()
    name: str = ""
    solver: str = ""
    settings: Mapping[str, Any] = field(default_factory=dict)
    #: the file it came from, for messages about its settings
    source: MethodText | None = field(default=None, repr=False, compare=False)

    def __post_init__(self) -> None:
        for step in self.steps:
            if not isinstance(step, Step):
                raise InputError(f"a method is made of steps, not of {type(step).__name__}",
                                 accepted="give steps of unmix.prepare")  # fmt: skip
        if self.solver and self.solver not in SOLVERS:
            raise InputError(f"solver is '{self.solver}'{suggestion(self.solver, SOLVERS)}",
                             accepted=f"give one of {', '.join(SOLVERS)}")  # fmt: skip
        if self.settings and not self.solver:
            raise InputError(f"settings {listed(self.settings)} are given without a solver",
                             accepted="name the solver")  # fmt: skip

    @property
    def additive(self) -> bool:
        """Whether every step keeps Beer-Lambert additivity."""
        return all(step.additive for step in self.steps)

    @property
    def learns(self) -> bool:
        """Whether a step learns from spectra, so that the method must be fitted before it is applied."""
        return any(step.learns for step in self.steps)

    def fit(self, spectra: Any, y: Any = None) -> Self:
        """The method with what its steps learn from these spectra written into their parameters.

        Parameters
        ----------
        spectra : DataArray, dims (..., spectral), or array_like
        y : array_like, optional
            Handed to steps that use it, such as the samples' names.

        Returns
        -------
        Method
            A new one, that learns nothing more and can be saved; this one is not changed.
        """
        fitted = []
        for step in self.steps:
            one: Step = clone(step)
            prepared = one.fit(spectra, y).transform(spectra)
            fitted.append(one.frozen() if step.learns else clone(step))
            spectra = prepared
        return type(self)(fitted, self.name, self.solver, self.settings, self.source)

    def apply(self, spectra: Any) -> Any:
        """Spectra after all steps.

        Parameters
        ----------
        spectra : DataArray, dims (..., spectral), or array_like
            Samples or pure spectra; both pass the same steps.

        Returns
        -------
        DataArray or ndarray

        Raises
        ------
        InputError
            When a step has yet to learn from spectra; or whatever a step refuses.
        """
        for number, step in enumerate(self.steps, start=1):
            if step.learns:
                raise InputError(
                    f"step {number}, {type(step).__name__}, learns from spectra, and would learn other things from "
                    "samples than from pure spectra",
                    accepted="use method.fit(spectra) first",
                )
            spectra = clone(step).fit_transform(spectra)
        return spectra

    def settings_for(self, solver: str, accepted: Collection[str]) -> dict[str, Any]:
        """The settings, when the method is for this solver.

        Parameters
        ----------
        solver : str
        accepted : collection of str
            The options that it has.

        Raises
        ------
        InputError
            When the method is for another solver.
        ReadError
            Naming line and key, for an option that the solver does not have.
        """
        if self.solver != solver:
            held = f"is for {self.solver}" if self.solver else "names no solver"
            raise InputError(f"the method '{self.name}' {held}, but {solver} was asked for",
                             accepted=f"write solver use = \"{solver}\" into it")  # fmt: skip
        for key in self.settings:
            if key not in accepted:
                source = self.source or MethodText({})
                raise source.error(f"{solver} has no option '{key}'{suggestion(key, list(accepted))}", "solver", 0, key,
                                   accepted=f"it has {', '.join(sorted(accepted))}")  # fmt: skip
        return dict(self.settings)

    def require_additive(self, purpose: str, spectra: xr.DataArray | None = None) -> None:
        """Raise InputError, naming the step and the alternative, unless every step keeps additivity.

        Parameters
        ----------
        purpose : str
            What needs additivity, such as ``quantify``.
        spectra : DataArray, optional
            Checked for missing channels and for steps taken earlier.
        """
        require_additive(self.steps, purpose, spectra)

    # -- text and files -----------------------------------------------------------------------------------------

    def to_text(self) -> str:
        """The method as TOML.

        Raises
        ------
        InputError
            For a parameter that a file cannot hold.
        """
        lines = [f"unmix_method = {VERSION}"]
        lines += table_text({"name": self.name}, "") if self.name else []
        for step in self.steps:
            values = {key: _plain(value) for key, value in step.get_params(deep=False).items() if value is not None}
            ordered = {key: values[key] for key in inspect.signature(type(step)).parameters if key in values}
            lines += ["", *table_text({"use": type(step).__name__, **ordered}, "[[step]]")]
        if self.solver:
            lines += ["", *table_text({"use": self.solver, **self.settings}, "[solver]")]
        return "\n".join(lines) + "\n"

    def save(self, path: str | os.PathLike[str], *, overwrite: bool = False) -> Path:
        """Write the method to a file, whole or not at all.

        Raises
        ------
        WriteError
            When the file exists and ``overwrite`` is false, or cannot be written.
        """
        text = self.to_text()
        with whole_file(path, overwrite) as beside:
            beside.write_text(text, encoding="utf-8")
        return Path(path)

    @classmethod
    def from_file(cls, path: str | os.PathLike[str]) -> Self:
        """Read a method from a file.

        Raises
        ------
        ReadError
            Naming file, line and key, when the file cannot be read or an entry cannot be used.
        """
        try:
            text = Path(path).read_text(encoding="utf-8-sig")
        except OSError as error:
            raise ReadError(f"could not be read ({error.strerror or error})", path=str(path)) from None
        except UnicodeDecodeError:
            raise ReadError("is not text in UTF-8", path=str(path), accepted="give a method file (TOML)") from None
        return cls.from_text(text, where=str(path), folder=Path(path).parent)

    @classmethod
    def from_text(cls, text: str, *, where: str = "", folder: Path | None = None) -> Self:
        """Read a method from TOML.

        Parameters
        ----------
        text : str
        where : str
            What the messages call it.
        folder : Path, optional
            Where spectra named as ``{ file = "..." }`` lie; the working directory when None.

        Raises
        ------
        ReadError
            Naming line and key.
        """
        source = parse(text, where)
        entries = source.entries
        if entries.get("unmix_method") != VERSION:
            held = entries.get("unmix_method")
            what = "has no 'unmix_method', so it is no method file" if held is None else f"is of version {held!r}"
            raise source.error(what, "", 0, "unmix_method", accepted=f"unmix_method = {VERSION} is understood")
        for key in entries:
            if key not in _TABLES:
                raise source.error(f"'{key}' is not an entry of a method{suggestion(key, _TABLES)}", "", 0, key,
                                   accepted="write name, [[step]] or [solver]")  # fmt: skip
        name = entries.get("name", "")
        if not isinstance(name, str):
            raise source.error(f"name is {name!r}", "", 0, "name", accepted="give a text in quotes")
        steps = entries.get("step", [])
        if not isinstance(steps, list) or not all(isinstance(step, dict) for step in steps):
            raise source.error("step is not a list of tables", "step", accepted="head each step with [[step]]")
        solver = entries.get("solver", {})
        if not isinstance(solver, dict) or not isinstance(solver.get("use", "") or None, str | None):
            raise source.error("solver is not a table with a name", "solver", accepted="write [solver] and use = ...")
        if solver and solver.get("use") not in SOLVERS:
            raise source.error(f"solver use is {solver.get('use')!r}{suggestion(str(solver.get('use')), SOLVERS)}",
                               "solver", 0, "use", accepted=f"give one of {', '.join(SOLVERS)}")  # fmt: skip
        made = [_step(source, number, entry, folder or Path()) for number, entry in enumerate(steps)]
        settings = {key: value for key, value in solver.items() if key != "use"}
        return cls(made, name, solver.get("use", ""), settings, source)


def _step(source: MethodText, number: int, entry: Mapping[str, Any], folder: Path) -> Step:
    """One step, every key and value checked."""
    use = entry.get("use")
    if use not in prepare.STEPS:
        hint = suggestion(str(use), list(prepare.STEPS))
        raise source.error(f"step {number + 1}: use is {use!r}{hint}", "step", number, "use",
                           accepted=f"give one of {', '.join(sorted(prepare.STEPS))}")  # fmt: skip
    kind = getattr(prepare, use)
    parameters = inspect.signature(kind).parameters
    values = {}
    for key, value in entry.items():
        if key == "use":
            continue
        if key not in parameters:
            hint = suggestion(key, list(parameters))
            raise source.error(f"{use} has no parameter '{key}'{hint}", "step", number, key,
                               accepted=f"it has {', '.join(parameters) or 'none'}")  # fmt: skip
        values[key] = _spectra(source, number, key, value, folder) if isinstance(value, dict) else value
        if not kind.accepts[key].passes(values[key]):
            raise source.error(f"{use}: {key} is {value!r}", "step", number, key,
                               accepted=f"give {kind.accepts[key].text}")  # fmt: skip
    for key, parameter in parameters.items():
        if parameter.default is parameter.empty and key not in values:
            raise source.error(f"{use} needs '{key}'", "step", number, "use", accepted=f"give {kind.accepts[key].text}")
    step: Step = kind(**values)
    return step


def _spectra(source: MethodText, number: int, key: str, value: Mapping[str, Any], folder: Path) -> xr.DataArray:
    """Spectra written into the file, or named by a file of their own."""
    accepted = 'give { file = "name" }, perhaps with quantity and unit, or along, quantity, axis and values'
    if (
        "file" in value
        and set(value) <= {"file", "quantity", "unit"}
        and all(isinstance(v, str) for v in value.values())
    ):
        return check_spectra(read(folder / value["file"], quantity=value.get("quantity"), unit=value.get("unit")))
    if set(value) == {"along", "quantity", "axis", "values"}:
        try:
            return make_spectra(value["values"], value["axis"], dim=value["along"], quantity=value["quantity"])
        except (InputError, TypeError, ValueError) as error:
            raise source.error(f"{key}: {error}", "step", number, key, accepted=accepted) from None
    raise source.error(f"{key} has {listed(value)}", "step", number, key, accepted=accepted)


def _plain(value: Any) -> Any:
    """A parameter as a file holds it: labelled spectra as a table of axis and values."""
    if not isinstance(value, xr.DataArray):
        return value
    value = check_spectra(value)
    dim = spectral_dim(value)
    return {
        "along": dim,
        "quantity": value.attrs.get("quantity", "absorbance"),
        "axis": np.asarray(value[dim].values).tolist(),
        "values": np.asarray(value.values, dtype=np.float64).reshape(-1, value.shape[-1]).tolist(),
    }
