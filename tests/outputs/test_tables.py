"""Tables: complete, numbers that read back, and a unit over every column of numbers."""

import csv
import io
import re
from pathlib import Path

import pytest

from tests.sheet_samples import many_cases, small_results
from workers.outputs.tables import TABLES, write_table, write_tables

# Columns of words; whether something is a number without a unit is decided by reading it.
WORDS = {"case", "quantity", "unit", "region", "support", "probe", "line", "cut", "hot spot",
         "governing case", "of", "case or combination"}  # fmt: skip


def rows(name: str, results: dict | None = None) -> list[dict[str, str]]:
    text = write_table(name, small_results() if results is None else results)
    return list(csv.DictReader(io.StringIO(text)))


@pytest.mark.parametrize("name", TABLES)
def test_every_column_of_numbers_has_its_unit(name: str) -> None:
    for heading in rows(name)[0]:
        assert heading in WORDS or re.search(r"\[.+\]$|^relative ", heading), heading


def test_peaks_tell_place_error_interval_and_utilisation() -> None:
    results = small_results()
    state = results["cases"]["pull"]
    state["utilisation"] = {"value": 0.25, "at": [1.0, 2.0], "region": "plate",
                            "yield_strength": 400.0}  # fmt: skip
    state["shear_max"] = {**state["shear_max"], "singular": {"value": 77.0, "at": [3.0, 4.0]},
                          "interval": None, "error": None}  # fmt: skip
    found = {row["quantity"]: row for row in rows("peaks", results) if row["case"] == "pull"}
    peak = found["von_mises"]
    assert (peak["unit"], float(peak["at least [MPa]"]), float(peak["at most [MPa]"])) == (
        "MPa", 99.5, 100.5,
    )  # fmt: skip
    assert found["displacement"]["unit"] == "mm"
    assert float(found["utilisation"]["value [MPa; mm; 1]"]) == 0.25
    assert float(found["shear_max"]["left out: singular value [MPa]"]) == 77.0
    assert found["shear_max"]["error estimate [MPa]"] == ""


def test_factors_are_told_for_combinations_and_for_cases_given_by_them() -> None:
    results = small_results()
    results["cases"]["pull"] = {**results["cases"]["pull"], "factors": {"unit": 0.8}}
    found = [tuple(row.values()) for row in rows("combinations", results)]
    assert found == [("pull", "unit", "0.8"), ("pull, factored", "pull", "1.0")]


def test_probes_tell_where_they_are_and_their_principal_stresses() -> None:
    (row,) = rows("probes")
    assert (float(row["x [mm]"]), float(row["y [mm]"])) == (50.0, 20.0)
    assert float(row["larger principal [MPa]"]) == 100.0
    assert float(row["smaller principal [MPa]"]) == 0.0


def test_tables_with_rows_are_written_and_named(tmp_path: Path) -> None:
    results = small_results(lines={}, hot_spots={})
    written = write_tables(results, tmp_path)
    assert set(TABLES) - set(written) == {"lines", "hot_spots"}
    for name, path in written.items():
        assert (tmp_path / path).read_bytes().decode() == write_table(name, results)


def test_every_one_of_hundreds_of_cases_is_in_the_tables() -> None:
    """300 cases with 5 quantities each; no strength is known, so there is no utilisation."""
    _, results = many_cases(300)
    assert len(rows("peaks", results)) == 300 * 5
    assert len(rows("reactions", results)) == 300
