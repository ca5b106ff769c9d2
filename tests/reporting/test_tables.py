"""Tables of results: what stands in them and how it is printed."""

import csv
import io
from typing import Any

import pytest

from wavepack.reporting.tables import (
    CAUTION,
    LIMITS,
    NO_ERROR_NOTE,
    as_csv,
    as_text,
    numbers,
    significant,
    status_line,
    title_of,
)

Results = dict[str, Any]


def line_of(text: str, name: str) -> str:
    """Return the one line that starts with a name."""
    (line,) = [line for line in text.splitlines() if line.strip().startswith(name)]
    return line


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.1262345678, "0.1262346"),
        (0.5, "0.5000000"),
        (4.0e-17, "4.000000e-17"),
        (-116.84768123, "-116.8477"),
        (1234567.0, "1234567"),
        (0.0, "0"),
        (None, "none"),
    ],
)
def test_seven_significant_digits(value: float | None, text: str) -> None:
    """Numbers keep seven significant digits, trailing zeros among them."""
    assert significant(value) == text


def test_decimal_points_stand_in_line() -> None:
    """Numbers in one column are shifted until their points meet; words stay at the left."""
    assert numbers(["0.5", "-116.8", "512", "none", ""]) == [
        "   0.5",
        "-116.8",
        " 512  ",
        "none  ",
        "      ",
    ]


def test_without_a_region_of_the_role_there_is_no_zero(results: Results) -> None:
    """What no region could count is said to be that; numbers stay in line, CSV keeps its 0."""
    before = line_of(as_text(results), "transmission ")
    del results["regions"]["source"]
    results["quantities"]["reflection"]["value"] = 0.0
    text = as_text(results)
    assert line_of(text, "reflection").split("  ")[-1] == "no region has this role"
    assert line_of(text, "transmission ") == before
    assert "quantities.reflection,0.0,," in as_csv(results)


def test_text_names_every_quantity(results: Results) -> None:
    """Each quantity stands in a line of its own with value, error and unit."""
    text = as_text(results)
    assert line_of(text, "transmission").split() == ["transmission", "0.1262346", "3.1e-06"]
    assert line_of(text, "reflection").split() == ["reflection", "0.8737654", "—"]
    assert line_of(text, "balance").split()[1] == "1.000000000000"
    assert line_of(text, "drain").split()[1] == "0.1262346"
    assert line_of(text, "x ").split() == ["x", "-116.8477", "—", "nm"]
    assert line_of(text, "mean crossing time").split()[3:] == ["none", "fs"]
    assert line_of(text, "highest transmission by energy").split()[4] == "0.9000000"
    assert line_of(text, "at the energy").split()[-2:] == ["0.1500000", "eV"]
    assert line_of(text, "sideband n = +1 at 0.25 eV").split()[-2] == "0.01000000"
    assert line_of(text, "absorber at lower x").split()[-2:] == ["0.0088", "eV"]
    assert "crank-nicolson, order 2, order in space 4, threads: 1" in text


def test_text_fits_eighty_columns(results: Results) -> None:
    """No line is wider than 80 columns, whatever the title and the reasons hold."""
    results["title"] = "word " * 60
    results["detectors"]["exit"]["transmission"] = None
    results["detectors"]["exit"]["reason"] = "the potential changes in time " * 6
    text = as_text(results)
    assert max(map(len, text.splitlines())) <= 80
    assert "No transmission by energy: the potential changes in time" in text
    assert "highest transmission" not in text


def test_text_states_limits_and_missing_errors(results: Results) -> None:
    """Below the tables stand the model's limits, the caution and what the dash means."""
    words = " ".join(as_text(results).split())
    assert NO_ERROR_NOTE in words
    assert LIMITS in words
    assert words.endswith(CAUTION)


def test_no_footnote_without_a_dash(results: Results) -> None:
    """Where every error is established nothing explains the dash."""
    results = {key: results[key] for key in ("status", "title", "time", "quantities")}
    for found in results["quantities"].values():
        found["error"] = 1e-6
    assert "—" not in as_text(results)


def test_bold_headings_only_on_request(results: Results) -> None:
    """Escape codes appear for terminals alone."""
    assert "\033" not in as_text(results)
    assert "\033[1mProbabilities\033[0m" in as_text(results, bold=True)


def test_title_cannot_steer_the_terminal(results: Results) -> None:
    """Control characters of a title are dropped, and it stays on one line."""
    results["title"] = "red \033[31m\n title\a"
    assert title_of(results) == "red [31m title"
    results["title"] = "\n"
    assert title_of(results) == "untitled"


def test_text_of_a_run_that_has_just_begun(results: Results) -> None:
    """Without quantities the status and the numerics remain."""
    begun = {key: results[key] for key in ("title", "numerics", "provenance")}
    begun |= {"status": "running", "time": {"value": 0.0, "unit": "fs"}}
    text = as_text(begun)
    assert "running at t = 0 fs" in text
    assert "Probabilities" not in text


def test_text_of_a_failed_run_tells_the_fault(results: Results) -> None:
    """The reason why a run was stopped stands first."""
    text = as_text(results | {"status": "failed", "fault": "step 7: the norm has grown"})
    assert text.index("step 7: the norm has grown") < text.index("Probabilities")


def test_status_line(results: Results) -> None:
    """One sentence says how far the run came, in what steps and how long that took."""
    results["status"] = "stopped_early"
    assert status_line(results) == (
        "stopped early at t = 1200 fs, 60000 steps of 0.02 fs to the end, 12.3 s of computing"
    )


def test_highest_value_at_an_end_says_so(results: Results) -> None:
    """A peak at the first or last energy with a value may lie beyond; the table says so."""
    results["detectors"]["exit"]["transmission"] = [None, 0.3, 0.4]
    assert "an end of the range" in line_of(as_text(results), "at the energy")


def test_csv_holds_every_quantity_in_full(results: Results) -> None:
    """Names are paths in results.json, numbers lose no digit, nulls are empty."""
    rows = {row["name"]: row for row in csv.DictReader(io.StringIO(as_csv(results)))}
    assert rows["time"]["value"] == "1200.0"
    assert rows["quantities.transmission"] == {
        "name": "quantities.transmission",
        "value": "0.1262345678",
        "error": "3.14e-06",
        "unit": "",
    }
    assert rows["regions.drain.probability"]["value"] == "0.1262345678"
    assert rows["detectors.exit.mean_crossing_time"]["value"] == ""
    assert rows["detectors.exit.sidebands.+1"]["value"] == "0.01"
    assert rows["expectations.x"]["unit"] == "nm"
    assert len(rows) == 1 + 6 + 2 + 5 + 2


def tail(value: float | None, unit: str, fit: float | None) -> Results:
    """Return a fitted quantity."""
    return {"value": value, "error": None, "unit": unit, "fit_error": fit}


def test_tails_and_times_are_printed_where_known(results: Results) -> None:
    """Lifetime, width, extrapolated probabilities, dwell time and delay have lines of their own."""
    known = {"lifetime": tail(139.8, "fs", 0.5), "width": tail(0.00471, "eV", 2e-5)}
    results["tails"] = {
        "well": known,
        "norm": {"lifetime": tail(None, "fs", None), "width": tail(None, "eV", None)},
    }
    results["extrapolated"] = {
        "transmission": tail(0.4999, "", 1e-6),
        "reflection": tail(None, "", None),
        "reason": None,
    }
    time = {"error": None, "unit": "fs"}
    results["regions"]["drain"]["dwell_time"] = {"value": 12.5, **time}
    results["detectors"]["exit"]["delay"] = {"value": -1.6, **time}
    text = as_text(results)
    assert line_of(text, "lifetime of well").split()[3:] == ["139.8000", "5.0e-01", "fs"]
    assert line_of(text, "extrapolated transmission").split()[2:] == ["0.4999000", "1.0e-06"]
    assert line_of(text, "time spent there").split()[3:] == ["12.50000", "—", "fs"]
    assert line_of(text, "delay against free motion").split()[4] == "-1.600000"
    assert "of norm" not in text
    assert "Errors of tails are of the fit alone" in text
    assert "extrapolated reflection" not in text
    assert "tails.well.lifetime,139.8,,fs" in as_csv(results)
