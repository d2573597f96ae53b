"""Results as tables: CSV (RFC 4180), one row for each thing that has a number.

Works on the results object alone. The first row names the columns, with units; numbers are written
so that they read back exactly. CSV has no place for cautions: whoever serves a table links to them.
"""

from collections.abc import Callable, Iterator, Mapping
from itertools import islice
from pathlib import Path
from types import MappingProxyType
from typing import Any

from workers.outputs.csv_text import csv_text

Results = Mapping[str, Any]
Row = list[Any]

STRESSES = ("von_mises", "principal_max", "principal_min", "shear_max")


def write_table(name: str, results: Results) -> str:
    """One table as CSV text.

    Raises
    ------
    KeyError   there is no table of this name; `TABLES` has them all.
    """
    return csv_text(TABLES[name](results))


def write_tables(results: Results, folder: Path) -> dict[str, str]:
    """Write every table that has a row into the folder of the results; paths within it, by name."""
    written = {}
    for name, rows in TABLES.items():
        if next(islice(rows(results), 1, None), None) is not None:
            path = folder / "tables" / f"{name}.csv"
            path.parent.mkdir(exist_ok=True)
            path.write_bytes(write_table(name, results).encode())
            written[name] = str(path.relative_to(folder))
    return written


def _states(results: Results) -> Iterator[tuple[str, Mapping[str, Any]]]:
    yield from results["cases"].items()
    yield from results["combinations"].items()


def _peaks(results: Results) -> Iterator[Row]:
    stress, length = results["units"]["stress"], results["units"]["length"]
    yield ["case", "quantity", f"value [{stress}; {length}; 1]", "unit", f"x [{length}]",
           f"y [{length}]", "region", f"error estimate [{stress}]", f"at least [{stress}]",
           f"at most [{stress}]", f"left out: singular value [{stress}]",
           f"left out: x [{length}]", f"left out: y [{length}]"]  # fmt: skip
    for name, state in _states(results):
        for quantity in (*STRESSES, "displacement"):
            peak = state[quantity]
            low, high = peak["interval"] or (None, None)
            singular = peak["singular"] or {"value": None, "at": (None, None)}
            yield [name, quantity, peak["value"], _unit(results, quantity), *peak["at"],
                   peak["region"], peak["error"], low, high, singular["value"],
                   *singular["at"]]  # fmt: skip
        if (use := state["utilisation"]) is not None:
            yield [name, "utilisation", use["value"], "1", *use["at"], use["region"], *[None] * 6]


def _unit(results: Results, quantity: str) -> str:
    """Of a value in a column of several quantities."""
    units = {"displacement": results["units"]["length"], "utilisation": "1"}
    return str(units.get(quantity, results["units"]["stress"]))


def _combinations(results: Results) -> Iterator[Row]:
    yield ["case or combination", "of", "factor [1]"]
    for name, state in _states(results):
        for case, factor in state.get("factors", {}).items():
            yield [name, case, factor]


def _envelope(results: Results) -> Iterator[Row]:
    stress, length = results["units"]["stress"], results["units"]["length"]
    yield ["quantity", f"value [{stress}; {length}; 1]", "unit", "governing case",
           f"x [{length}]", f"y [{length}]", "region"]  # fmt: skip
    for quantity, peak in results["envelope"].items():
        if peak is not None:
            yield [quantity, peak["value"], _unit(results, quantity), peak["governs"], *peak["at"],
                   peak["region"]]  # fmt: skip


def _reactions(results: Results) -> Iterator[Row]:
    force, length = results["units"]["force"], results["units"]["length"]
    yield ["case", "support", f"fx [{force}]", f"fy [{force}]", f"moment [{force} {length}]",
           f"about x [{length}]", f"about y [{length}]"]  # fmt: skip
    for name, state in _states(results):
        for support, reaction in state["reactions"].items():
            yield [name, support, *reaction["force"], reaction["moment"], *reaction["about"]]


def _equilibrium(results: Results) -> Iterator[Row]:
    force, length = results["units"]["force"], results["units"]["length"]
    parts = (f"fx [{force}]", f"fy [{force}]", f"moment [{force} {length}]")
    yield ["case", *(f"{side} {part}" for side in ("applied", "reaction") for part in parts),
           "relative residual"]  # fmt: skip
    for name, state in _states(results):
        balance = state["equilibrium"]
        yield [name, *balance["applied"], *balance["reaction"], balance["residual"]]


def _probes(results: Results) -> Iterator[Row]:
    stress, length = results["units"]["stress"], results["units"]["length"]
    yield ["probe", "case", f"x [{length}]", f"y [{length}]",
           *(f"{c} [{stress}]" for c in ("xx", "yy", "xy")), f"von Mises [{stress}]",
           f"larger principal [{stress}]", f"smaller principal [{stress}]", f"u [{length}]",
           f"v [{length}]"]  # fmt: skip
    for probe, by_case in results["probes"].items():
        for case, found in by_case.items():
            yield [probe, case, *found["at"], *found["stress"], found["von_mises"],
                   *found["principal"], *found["displacement"]]  # fmt: skip


def _lines(results: Results) -> Iterator[Row]:
    stress, length = results["units"]["stress"], results["units"]["length"]
    yield ["line", "case", f"distance [{length}]", f"x [{length}]", f"y [{length}]",
           *(f"{c} [{stress}]" for c in ("xx", "yy", "xy")), f"von Mises [{stress}]",
           f"u [{length}]", f"v [{length}]"]  # fmt: skip
    for name, line in results["lines"].items():
        for case, found in line["cases"].items():
            columns = (line["distance"], line["points"], found["stress"], found["von_mises"],
                       found["displacement"])  # fmt: skip
            for distance, point, tensor, von_mises, moved in zip(*columns, strict=True):
                yield [name, case, distance, *point, *tensor, von_mises, *moved]


def _cuts(results: Results) -> Iterator[Row]:
    force, length = results["units"]["force"], results["units"]["length"]
    yield ["cut", "case", f"normal [{force}]", f"shear [{force}]", f"moment [{force} {length}]",
           f"about x [{length}]", f"about y [{length}]"]  # fmt: skip
    for cut, by_case in results["cuts"].items():
        for case, found in by_case.items():
            yield [cut, case, found["normal"], found["shear"], found["moment"], *found["about"]]


def _hot_spots(results: Results) -> Iterator[Row]:
    stress, length = results["units"]["stress"], results["units"]["length"]
    yield ["hot spot", "case", f"hot-spot stress [{stress}]", f"at 0.4 t [{stress}]",
           f"at 1.0 t [{stress}]", f"t [{length}]", f"x [{length}]", f"y [{length}]"]  # fmt: skip
    for name, spot in results["hot_spots"].items():
        for case, found in spot["cases"].items():
            yield [name, case, found["stress"], *found["along"], spot["thickness"], *spot["at"]]


TABLES: Mapping[str, Callable[[Results], Iterator[Row]]] = MappingProxyType(
    {
        "peaks": _peaks,
        "envelope": _envelope,
        "combinations": _combinations,
        "reactions": _reactions,
        "equilibrium": _equilibrium,
        "probes": _probes,
        "lines": _lines,
        "cuts": _cuts,
        "hot_spots": _hot_spots,
    }
)
