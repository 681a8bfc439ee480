"""Calibrations and predictions on a terminal: the table, the reasons below it, and what was assumed."""

import math
import sys
from collections.abc import Mapping, Sequence

import xarray as xr

from unmix.cli.show import VERDICT_STYLES, print_remarks
from unmix.cli.terminal import Cell, Column, coloured, painted, print_table, shortened, wrapped
from unmix.report.numbers import amount, significant
from unmix.report.tables import rows

#: set of samples -> what its error is called
_ERRORS = {"calibration": "SEC", "cross-validation": "SECV", "nested": "SECV nested", "test": "SEP"}


def print_calibration(data: xr.Dataset) -> None:
    """The curve of cross-validation, the figures of merit, and whether the calibration may be used."""
    print(f"{data.attrs['title']}: {data.sizes['latent']} latent variables, {data.sizes['sample']} samples, "
          f"{data.attrs['validation']}")  # fmt: skip
    print()
    names = [str(name) for name in data["property"].values]
    used = data.sizes["latent"]
    errors = [Column(f"SECV {name}", right=True) for name in names]
    columns = [Column("latent variables", right=True), *errors, Column("")]
    table: list[list[str | Cell]] = [
        [str(k), *(significant(float(value), 4) for value in data["curve"].values[k]), "used" if k == used else ""]
        for k in range(data.sizes["components"])
    ]
    print_table(columns, table)
    print()
    columns = [Column("property", cut=True), Column("figure"), Column("error", right=True), Column("unit"),
               Column("bias", right=True), Column("p(bias)", right=True), Column("slope", right=True),
               Column("R2", right=True), Column("RPD", right=True), Column("samples", right=True)]  # fmt: skip
    print_table(columns, [_figures(row) for row in rows(data)])
    print()
    p = float(data["permutation_p"].item())
    if math.isfinite(p):
        print(wrapped(f"Permutation test with {data.attrs['permutations']} shuffles: p = {p:.2g}"))
    _print_verdict("", str(data["verdict"].item()), str(data["reason"].item()))
    print_remarks([data])


def _figures(row: Mapping[str, object]) -> list[str | Cell]:
    def number(name: str, digits: int) -> str:
        value = row[name]
        return significant(float(value) if isinstance(value, float) else math.nan, digits)

    shown = [number(name, digits) for name, digits in (("bias", 2), ("bias_p", 2), ("slope", 3), ("r2", 4), ("rpd", 3))]
    which = _ERRORS[str(row["set"])]
    if which == "SEC":
        # zero and one by the way the model is made
        shown[:3] = ["", "", ""]
    return [str(row["property"]), which, number("error", 3), str(row["unit"]), *shown, f"{row['samples']:.0f}"]


def print_predictions(results: Sequence[xr.Dataset]) -> None:
    """Values with their intervals, and why some are in question."""
    columns = [Column("sample", cut=True), Column("property", cut=True), Column("value", right=True),
               Column("lower", right=True), Column("upper", right=True), Column("unit"),
               Column("Q/limit", right=True), Column("T2/limit", right=True), Column("verdict")]  # fmt: skip
    table = rows(results)
    print_table(columns, [_prediction(row) for row in table])
    print()
    said: set[tuple[str, str]] = set()
    for row in table:
        key = (str(row["sample"]), str(row["reason"]))
        if row["verdict"] != "supported" and key not in said:
            said.add(key)
            _print_verdict(f"{shortened(key[0], 30)} ", str(row["verdict"]), key[1])
    print_remarks(results)


def _prediction(row: Mapping[str, object]) -> list[str | Cell]:
    def number(name: str) -> float:
        value = row[name]
        return float(value) if isinstance(value, float) else math.nan

    verdict = str(row["verdict"])
    one = amount(number("predicted"), number("lower"), number("upper"), detected=True)
    ratios = [significant(number(name) / number(limit), 2) if number(limit) else "" for name, limit in
              (("q_residual", "q_limit"), ("t2", "t2_limit"))]  # fmt: skip
    return [str(row["sample"]), str(row["property"]), one.value, one.lower, one.upper, str(row["unit"]), *ratios,
            Cell(verdict, VERDICT_STYLES.get(verdict, ""))]  # fmt: skip


def _print_verdict(before: str, verdict: str, reason: str) -> None:
    text = wrapped(reason, first=f"{before}{verdict}: ", rest="  ")
    colour = coloured(sys.stdout)
    print(text.replace(verdict, painted(verdict, VERDICT_STYLES.get(verdict, ""), colour=colour), 1))
