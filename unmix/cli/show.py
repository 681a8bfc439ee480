"""Results on a terminal: one table for all samples, below it the reasons, what was assumed, and the caution."""

import math
import sys
from collections.abc import Mapping, Sequence

import xarray as xr

from unmix.cli.output import print_error
from unmix.cli.terminal import Cell, Column, coloured, painted, print_table, shortened, wrapped
from unmix.report.details import amounts_of
from unmix.report.numbers import significant
from unmix.report.tables import rows
from unmix.report.view import Composition, Result
from unmix.report.words import advice, apartness, lead
from unmix.spectra import labels_of

#: verdict -> style
VERDICT_STYLES = {"supported": "good", "doubtful": "warn", "unsupported": "bad"}


def remarks_of(results: Sequence[xr.Dataset]) -> list[str]:
    """What was assumed and noted, each sentence once."""
    views = [Result(one) for one in results]
    return list(dict.fromkeys(
        text for attribute in ("assumptions", "notes") for view in views for text in view.sentences(attribute)
    ))  # fmt: skip


def print_refused(refused: Mapping[str, str]) -> None:
    """What could not be answered, on standard error."""
    for name, reason in refused.items():
        print_error(reason if name in reason else f"{name}: {reason}")


def print_amounts(results: Sequence[xr.Dataset], order: Sequence[tuple[str, str]]) -> None:
    """Amounts of all samples in the order in which they were given."""
    views = [Composition(one) for one in results]
    place = {entry: k for k, entry in enumerate(order)}
    listed = [(view, i) for view in views for i in range(len(view))]
    listed.sort(
        key=lambda entry: place.get((entry[0].samples[entry[1]], entry[0].files[entry[1]]), len(place))
    )
    columns = [
        Column("sample", cut=True), Column("component", cut=True), Column("amount", right=True),
        Column("lower", right=True), Column("upper", right=True), Column("unit"), Column("verdict"),
    ]  # fmt: skip
    print_table(columns, [row for view, i in listed for row in _rows(view, i)])
    print()


def print_reasons(results: Sequence[xr.Dataset], order: Sequence[tuple[str, str]]) -> None:
    """Why answers are in question and what to do next, then what was assumed and the caution."""
    colour = coloured(sys.stdout)
    for view, i in _in_order(results, order):
        verdict = view.verdicts[i]
        if verdict != "supported":
            first = f"{shortened(view.samples[i], 30)} {verdict}: "
            text = wrapped(view.reasons[i], first=first, rest="  ")
            print(text.replace(verdict, painted(verdict, VERDICT_STYLES.get(verdict, ""), colour=colour), 1))
            print(wrapped(advice(view, i), first="  Next: ", rest="  "))
    print(wrapped(lead([Composition(one) for one in results])))
    print_remarks(results)


def print_against(
    results: Sequence[xr.Dataset], order: Sequence[tuple[str, str]], truth: Mapping[str, Mapping[str, float]]
) -> None:
    """Amounts beside the true ones, and whether the interval holds them."""
    columns = [
        Column("sample", cut=True), Column("component", cut=True), Column("true", right=True),
        Column("amount", right=True), Column("interval", right=True), Column("unit"), Column("holds it"),
    ]  # fmt: skip
    rows: list[list[str | Cell]] = []
    for view, i in _in_order(results, order):
        known = truth.get(view.samples[i], {})
        for j, one in enumerate(amounts_of(view, i)):
            true = known.get(view.components[j], math.nan)
            if not math.isfinite(true):
                continue
            low, high = (view.table(name)[i, j] for name in ("lower", "upper"))
            inside = low <= true <= high
            holds = Cell("yes" if inside else "no", "good" if inside else "bad") if one.known else Cell("-")
            name = view.samples[i] if j == 0 else ""
            amount = one.value.replace(" ", "")
            rows.append(
                [name, view.components[j], f"{true:g}", amount, one.interval, view.concentration_unit, holds]
            )
    print_table(columns, rows)
    print()


def _in_order(
    results: Sequence[xr.Dataset], order: Sequence[tuple[str, str]]
) -> list[tuple[Composition, int]]:
    """All samples of all results in the order in which they were given."""
    place = {entry: k for k, entry in enumerate(order)}
    listed = [(view, i) for view in map(Composition, results) for i in range(len(view))]
    return sorted(
        listed,
        key=lambda entry: place.get((entry[0].samples[entry[1]], entry[0].files[entry[1]]), len(place)),
    )


def _rows(view: Composition, sample: int) -> list[list[str | Cell]]:
    verdict = view.verdicts[sample]
    return [
        [
            view.samples[sample] if j == 0 else "",
            view.components[j],
            one.value.replace(" ", ""),
            one.lower,
            one.upper,
            view.concentration_unit,
            Cell(verdict, VERDICT_STYLES.get(verdict, "")) if j == 0 else "",
        ]
        for j, one in enumerate(amounts_of(view, sample))
    ]


def print_remarks(results: Sequence[xr.Dataset]) -> None:
    """Assumptions, notes and the caution, below a table."""
    for text in remarks_of(results):
        print(wrapped(text, first="note: ", rest="  "))
    for text in dict.fromkeys(Result(one).text("caution") for one in results):
        if text:
            print(painted(wrapped(text), "faint", colour=coloured(sys.stdout)))


def print_candidates(results: Sequence[xr.Dataset]) -> None:
    """Candidate mixtures of all samples, the reasons below."""
    columns = [Column("sample", cut=True), Column("evidence", right=True), Column("member", cut=True),
               Column("amount", right=True), Column("lower", right=True), Column("upper", right=True),
               Column("verdict")]  # fmt: skip
    table: list[list[str | Cell]] = []
    for one in results:
        before = None
        for row in rows(one):
            new = (row["sample"], row["rank"]) != before
            before = (row["sample"], row["rank"])
            numbers = [significant(value, 3) if isinstance(value := row[key], float) else ""
                       for key in ("concentration", "lower", "upper")]  # fmt: skip
            head, verdict = new and row["rank"] == 1.0, str(row["verdict"])
            table.append([str(row["sample"]) if head else "", f"{row['weight']:.1%}" if new else "",
                          str(row["component"]) or "none", *numbers,
                          Cell(verdict, VERDICT_STYLES.get(verdict, "")) if head else ""])  # fmt: skip
    print_table(columns, table)
    print()
    for one in results:
        told = zip(one["verdict"].values.ravel(), one["reason"].values.ravel(), strict=True)
        for label, (verdict, reason) in zip(labels_of(one["measured"]), told, strict=True):
            if str(verdict) != "supported":
                print(wrapped(str(reason), first=f"{shortened(label, 30)} {verdict}: ", rest="  "))
    print_remarks(results)


def print_design(result: xr.Dataset) -> None:
    """What pure spectra allow: one row a component, then verdict and reason."""
    view = Result(result)
    inflation, own = view.per_component("variance_inflation"), view.per_component("selectivity")
    limits = view.per_component("detection_limit")
    confused = view.confused_with()
    unit = view.unit("detection_limit")
    columns = [
        Column("component", cut=True), Column("in words"), Column("inflation", right=True),
        Column("own signal", right=True), Column("detection limit", right=True),
        Column("taken for", cut=True),
    ]  # fmt: skip
    rows = [
        [
            name,
            apartness(inflation[j]),
            significant(inflation[j], 3),
            f"{own[j]:.1%}" if math.isfinite(own[j]) else significant(own[j]),
            f"{significant(limits[j], 2)} {unit}" if math.isfinite(limits[j]) else significant(limits[j]),
            confused[j],
        ]
        for j, name in enumerate(view.components)
    ]
    print_table(columns, rows)
    print()
    for text in view.sentences("advice"):
        print(wrapped(text, rest="  "))
    if "verdict" in result:
        verdict = str(result["verdict"].item())
        reason = str(result["reason"].item()) if "reason" in result else ""
        text = wrapped(f"{verdict}: {reason}", rest="  ")
        print(
            text.replace(
                verdict, painted(verdict, VERDICT_STYLES.get(verdict, ""), colour=coloured(sys.stdout)), 1
            )
        )
    print_remarks([result])
