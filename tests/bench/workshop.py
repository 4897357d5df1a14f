"""The half of tests/bench/workshop.rs that is done with pandas and NumPy: `python workshop.py FOLDER`.

Reads names of tasks, one a line, from the standard input; does each once on the files of FOLDER and answers with the
seconds it took. A name after `write ` also leaves the result in FOLDER/numbers: all times, then all values, as doubles.
"""

import sys
import time
from pathlib import Path

import numpy as np
import pandas as pd

FOLDER = Path(sys.argv[1])
# What workshop.rs asks for: the decades and years that the uneven record covers.
FIRST_YEAR, END_YEAR = -997_990, -40_000


def load_years():
    """Whole years, with the default reader (C, without an index, which is the fastest)."""
    table = pd.read_csv(FOLDER / "years.csv")
    return table["year"], table["value"]


def load_uneven():
    """Decimal years on no grid."""
    table = pd.read_csv(FOLDER / "uneven.csv")
    return table["decimal_year"], table["value"]


def load_days():
    """Dates, parsed as dates."""
    table = pd.read_csv(FOLDER / "days.csv", parse_dates=["date"])
    return table["date"], table["value"]


YEARS = pd.read_csv(FOLDER / "years.csv", index_col="year")["value"]
UNEVEN_TIMES, UNEVEN_VALUES = (column.to_numpy() for column in load_uneven())
UNEVEN = pd.DataFrame({"time": UNEVEN_TIMES, "value": UNEVEN_VALUES})


def running_mean():
    """Centred, over 101 years; shorter at the ends."""
    return YEARS.index, YEARS.rolling(101, center=True, min_periods=51).mean()


def means_of_points():
    """The mean of the points in each decade: what one writes first."""
    means = UNEVEN.groupby(((UNEVEN["time"] - FIRST_YEAR) // 10).astype("int64"))["value"].mean()
    return FIRST_YEAR + 10 * means.index, means


def means_of_the_line():
    """The mean over each decade of the straight lines between the points, from their integral."""
    times, values = UNEVEN_TIMES, UNEVEN_VALUES
    edges = np.arange(FIRST_YEAR, END_YEAR + 1, 10.0)
    integral = np.concatenate([[0.0], np.cumsum(0.5 * (values[1:] + values[:-1]) * np.diff(times))])
    before = np.searchsorted(times, edges, side="right") - 1
    at_edge = np.interp(edges, times, values)
    until = integral[before] + 0.5 * (values[before] + at_edge) * (edges - times[before])
    return edges[:-1], np.diff(until) / 10


def line_at_years():
    """The straight lines between the points at the middle of every year."""
    at = np.arange(FIRST_YEAR, END_YEAR) + 0.5
    return at - 0.5, np.interp(at, UNEVEN_TIMES, UNEVEN_VALUES)


def years_ce(times):
    """Dates as decimal years, as they leave our reader; numbers as they are."""
    if not isinstance(times, pd.Series) or times.dtype.kind != "M":
        return np.asarray(times, dtype=float)
    length = np.where(times.dt.is_leap_year, 366, 365)
    return (times.dt.year + (times.dt.day_of_year - 1) / length).to_numpy()


def main():
    """Answer until the input ends."""
    for line in sys.stdin:
        write, _, name = line.strip().rpartition(" ")
        task = globals()[name]
        began = time.perf_counter()
        times, values = task()
        taken = time.perf_counter() - began
        if write:
            numbers = np.concatenate([years_ce(times), np.asarray(values, dtype=float)])
            numbers.astype("<f8").tofile(FOLDER / "numbers")
        print(taken, flush=True)


if __name__ == "__main__":
    main()
