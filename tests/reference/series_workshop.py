"""The series algebra held against pandas and SciPy: `python series_workshop.py RHYTHMITE FOLDER`.

Seeded series are written to FOLDER as files, `RHYTHMITE run --format json` computes each expression below from them,
and the same is computed here with general-purpose libraries. Every check names its source (what computed the expected
values) and its tolerance, relative to the largest expected value. Exits with 1 and prints the differences if any.
"""

import json
import subprocess
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pandas as pd
import scipy
from scipy import integrate, interpolate, ndimage, signal, stats

# The same operations in another order: differences are rounding alone.
ROUNDING = 1e-12
# Means over months: a decimal year is good to 2e-13, three millionths of a millionth of a month.
MONTHS = 1e-11
# Means over days, which are shorter still.
DAYS = 1e-10
# Sums over long windows, or through differences of large times.
LONG_SUMS = 1e-10
# Fits through decimal years near 2000, where a time is good to 2e-13.
FITS = 1e-9


@dataclass
class Check:
    """One expression, what it must give, and who says so."""

    name: str
    expression: str
    values: np.ndarray
    source: str
    tolerance: float
    starts: np.ndarray | None = None


def seeded_series():
    """The inputs: uneven instants, whole years with and without gaps, months with gaps, days."""
    draw = np.random.default_rng(20260711)
    uneven = np.round(np.cumsum(draw.uniform(0.05, 1.9, 400)) + 1200.0, 4)
    uneven_values = np.cumsum(draw.normal(size=uneven.size))
    years = np.arange(1801, 2001)
    whole = pd.Series(np.cumsum(draw.normal(size=years.size)) + 12.0, index=years)
    holed = whole.copy()
    holed.iloc[[0, 3, 17, 18, 19, 60, 121, 122, 199]] = np.nan
    late = pd.Series(draw.normal(size=121) + 40.0, index=np.arange(1900, 2021))
    months = pd.period_range("1901-03", "1930-10", freq="M")
    monthly = pd.Series(draw.normal(size=len(months)) + 10.0 * np.sin(np.arange(len(months))), index=months)
    monthly.iloc[[5, 40, 41, 42, 43, 44, 100, 200]] = np.nan
    days = pd.date_range("1991-01-01", "2000-12-31", freq="D")
    daily = pd.Series(draw.normal(size=len(days)).cumsum(), index=days)
    return uneven, uneven_values, whole, holed, late, monthly, daily


def write_column(path, head, times, values):
    """A file of times and values; a gap is an empty cell."""
    lines = [f"{head},value"]
    lines += [f"{time},{'' if np.isnan(value) else repr(float(value))}" for time, value in zip(times, values)]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")


def running_mean(series, width):
    """pandas' centred rolling mean, where two thirds of the window inside the record have values."""
    windows = series.rolling(width, center=True, min_periods=1)
    inside = pd.Series(1.0, index=series.index).rolling(width, center=True, min_periods=1).sum()
    return windows.mean().where(windows.count() >= 2.0 / 3.0 * inside - 1e-9)


def gaussian_mean(values, deviation):
    """SciPy's Gaussian filter of the values over that of where there are any; gaps where under two thirds have."""
    known = ~np.isnan(values)
    smooth = lambda row: ndimage.gaussian_filter1d(row, deviation, mode="constant", truncate=4.0)
    weight = smooth(known.astype(float))
    mean = smooth(np.where(known, values, 0.0)) / weight
    return np.where(weight >= 2.0 / 3.0 * smooth(np.ones_like(values)), mean, np.nan)


def season_means(series, months, whole):
    """pandas: the mean of the months of each year, December with the year that follows; only where all are there."""
    over_the_turn = months[0] > months[-1]
    chosen = series[series.index.month.isin(months)]
    year = chosen.index.year + ((chosen.index.month >= months[0]) & over_the_turn)
    groups = chosen.groupby(year)
    return groups.mean().where(groups.count() == whole(groups)), groups.size() == whole(groups)


def checks(uneven, uneven_values, whole, holed, late, monthly, daily):
    """Every check, in the order of the manual."""
    found = []
    inner = np.arange(int(uneven[0]) + 1, int(uneven[-1]))
    clock = f"{inner[0]}..{inner[-1]} CE by 1 yr"
    middles = inner + 0.5

    # on
    line = interpolate.make_interp_spline(uneven, uneven_values, k=1)
    found.append(Check(
        "on, coarser: the mean of the line through uneven instants",
        f"uneven |> on({inner[0] + 3}..{inner[0] + 302} CE by 10 yr)",
        np.array([line.integrate(start, start + 10) / 10 for start in range(inner[0] + 3, inner[0] + 303, 10)]),
        "scipy.interpolate.make_interp_spline(k=1).integrate", LONG_SUMS,
        np.arange(inner[0] + 3, inner[0] + 303, 10)))
    edges = np.concatenate([
        [uneven[0] - (uneven[1] - uneven[0]) / 2], (uneven[1:] + uneven[:-1]) / 2,
        [uneven[-1] + (uneven[-1] - uneven[-2]) / 2]])
    flat = interpolate.PPoly(uneven_values[None, :], edges)
    found.append(Check(
        "on, mean: every value over its own cell", f"uneven |> on({clock}, method: mean)",
        np.array([flat.integrate(start, start + 1) for start in inner]),
        "scipy.interpolate.PPoly.integrate of constants", LONG_SUMS, inner))
    found.append(Check(
        "on, linear", f"uneven |> on({clock}, method: linear)",
        np.interp(middles, uneven, uneven_values), "numpy.interp", LONG_SUMS, inner))
    found.append(Check(
        "on, monotone cubic", f"uneven |> on({clock}, method: monotone_cubic)",
        interpolate.PchipInterpolator(uneven, uneven_values)(middles),
        "scipy.interpolate.PchipInterpolator", LONG_SUMS, inner))
    found.append(Check(
        "on, nearest", f"uneven |> on({clock}, method: nearest)",
        interpolate.interp1d(uneven, uneven_values, kind="nearest")(middles),
        "scipy.interpolate.interp1d(kind='nearest')", ROUNDING, inner))
    by_year = monthly.groupby(monthly.index.year)
    yearly = by_year.mean().where(by_year.count() >= 8)
    found.append(Check(
        "on, months to years: two thirds of the months make a year", "monthly |> on(1901..1930 CE by 1 yr)",
        yearly.to_numpy(), "pandas groupby(year).mean() where count() >= 8", MONTHS, yearly.index.to_numpy()))

    # smooth
    for width in (3, 11, 51):
        found.append(Check(
            f"running mean of {width} years, with gaps", f"holed |> smooth({width} yr)",
            running_mean(holed, width).to_numpy(), "pandas rolling(center=True).mean()", ROUNDING))
    found.append(Check(
        "running mean, no value at the ends", "whole |> smooth(11 yr, ends: gap)",
        whole.rolling(11, center=True).mean().to_numpy(), "pandas rolling(center=True).mean()", ROUNDING))
    for deviation in (1, 4):
        found.append(Check(
            f"Gaussian of {deviation} years, with gaps", f"holed |> smooth({deviation} yr, window: gaussian)",
            gaussian_mean(holed.to_numpy(), deviation), "scipy.ndimage.gaussian_filter1d, normalised", ROUNDING))

    # splice
    joined = pd.concat([whole[whole.index < 1950], late[late.index >= 1950]])
    both = pd.concat([whole, late], axis=1, join="inner").mean()
    for adjust, early in (
        ("none", whole), ("offset", whole + (both[1] - both[0])), ("scale", whole * (both[1] / both[0])),
    ):
        joined = pd.concat([early[early.index < 1950], late[late.index >= 1950]])
        found.append(Check(
            f"splice, adjusted by {adjust}", f"splice(whole, late, at: 1950 CE, adjust: {adjust})",
            joined.to_numpy(), "pandas concat, fitted over the inner join", ROUNDING, joined.index.to_numpy()))

    # season
    for name, months in (("December..February", [12, 1, 2]), ("June..August", [6, 7, 8])):
        means, present = season_means(monthly, months, lambda groups: len(months))
        kept = means[present]
        found.append(Check(
            f"season {name} of months", f"monthly |> season({name})", kept.to_numpy(),
            "pandas groupby(season year).mean() where all months are there", MONTHS,
            kept.index.to_numpy() + (months[0] - 1) / 12 - (months[0] > months[-1])))
    summer = daily[daily.index.month.isin([6, 7, 8])]
    summer = summer.groupby(summer.index.year).mean()
    found.append(Check(
        "season June..August of days: calendar months of their true lengths", "daily |> season(June..August)",
        summer.to_numpy(), "pandas groupby(year).mean() of the days of June to August", DAYS))
    winter = daily[daily.index.month.isin([12, 1, 2])]
    winter = winter.groupby(winter.index.year + (winter.index.month == 12)).mean().loc[1992:2000]
    found.append(Check(
        "season December..February of days", "daily |> season(December..February)",
        winter.to_numpy(), "pandas groupby(season year).mean()", DAYS))
    hydrological = monthly.groupby(monthly.index.year + (monthly.index.month >= 10))
    hydrological = hydrological.mean().where(hydrological.count() == 12).loc[1902:1930]
    found.append(Check(
        "yearly from October", "monthly |> yearly(from: October)", hydrological.to_numpy(),
        "pandas groupby(hydrological year).mean() where all months are there", MONTHS))

    # rate and cumulate
    found.append(Check(
        "rate of uneven instants", "rate(uneven)", np.diff(uneven_values) / np.diff(uneven), "numpy.diff", LONG_SUMS))
    found.append(Check(
        "cumulate uneven instants", "cumulate(uneven)",
        integrate.cumulative_trapezoid(uneven_values, uneven, initial=0.0),
        "scipy.integrate.cumulative_trapezoid", LONG_SUMS))
    found.append(Check(
        "cumulate steps", "cumulate(whole)", np.concatenate([[0.0], np.cumsum(whole.to_numpy())]),
        "numpy.cumsum", ROUNDING))

    # detrend and standardise
    found.append(Check(
        "detrend even steps", "whole |> detrend()", signal.detrend(whole.to_numpy()), "scipy.signal.detrend", FITS))
    known = holed.dropna()
    fit = stats.linregress(known.index.to_numpy(), known.to_numpy())
    found.append(Check(
        "detrend with gaps", "holed |> detrend()",
        (holed - (fit.intercept + fit.slope * holed.index)).to_numpy(), "scipy.stats.linregress", FITS))
    fit = stats.linregress(uneven, uneven_values)
    found.append(Check(
        "detrend uneven instants", "uneven |> detrend()",
        uneven_values - (fit.intercept + fit.slope * uneven), "scipy.stats.linregress", FITS))
    found.append(Check(
        "standardise with gaps", "holed |> standardise()",
        stats.zscore(holed.to_numpy(), ddof=1, nan_policy="omit"), "scipy.stats.zscore(ddof=1)", ROUNDING))
    window = holed.loc[1851:1900]
    found.append(Check(
        "standardise over a span", "holed |> standardise(over: 1851..1900 CE)",
        ((holed - window.mean()) / window.std()).to_numpy(), "pandas mean() and std()", ROUNDING))
    return found


def differences(check, output):
    """What is wrong with an output, in words; nothing where it agrees."""
    if output["kind"] != "series":
        return f"gives {output['kind']}: {output.get('error', output)}"
    values = np.array([np.nan if value is None else value for value in output["nominal"]])
    if values.shape != check.values.shape:
        return f"has {values.size} values, expected {check.values.size}"
    if not np.any(~np.isnan(values)):
        return "is all gaps: nothing was compared"
    if check.starts is not None:
        apart = np.abs(np.array(output["time"]["values"]) - check.starts)
        if apart.max() > 1e-9:
            return f"stands {apart.max():.3g} yr off its times"
    gaps = np.flatnonzero(np.isnan(values) != np.isnan(check.values))
    if gaps.size:
        first = gaps[0]
        return f"{gaps.size} gaps differ, first at {first}: {values[first]} where {check.values[first]} is expected"
    apart = np.abs(values - check.values)
    worst = int(np.nanargmax(apart))
    allowed = check.tolerance * max(1.0, float(np.nanmax(np.abs(check.values))))
    if apart[worst] > allowed:
        count = int(np.sum(apart > allowed))
        return (f"{count} values differ by more than {allowed:.3g}, most at {worst}: "
                f"{values[worst]!r} where {check.values[worst]!r} is expected")
    return None


def main():
    """Write the inputs, run the program, compare."""
    program, folder = sys.argv[1], Path(sys.argv[2])
    folder.mkdir(parents=True, exist_ok=True)
    uneven, uneven_values, whole, holed, late, monthly, daily = seeded_series()
    write_column(folder / "uneven.csv", "decimal_year", [f"{time:.4f}" for time in uneven], uneven_values)
    write_column(folder / "whole.csv", "year", whole.index, whole)
    write_column(folder / "holed.csv", "year", holed.index, holed)
    write_column(folder / "late.csv", "year", late.index, late)
    write_column(folder / "monthly.csv", "date", monthly.index.strftime("%Y-%m"), monthly)
    write_column(folder / "daily.csv", "date", daily.index.strftime("%Y-%m-%d"), daily)
    listed = checks(uneven, uneven_values, whole, holed, late, monthly, daily)
    # The uneven record has gaps longer than three of its median steps; the libraries bridge them all.
    lines = [f'{name} = load("{name}.csv", unit: "1")' for name in ("whole", "holed", "late", "monthly", "daily")]
    lines.append('uneven = load("uneven.csv", unit: "1", longest_gap: 100 yr)')
    lines += [check.expression for check in listed]
    script = folder / "series_workshop.rhy"
    script.write_text("\n".join(lines) + "\n", encoding="utf-8")
    run = subprocess.run([program, "run", "--format", "json", str(script)], capture_output=True, text=True, check=False)
    if not run.stdout:
        sys.exit(f"{program} printed nothing:\n{run.stderr}")
    outputs = json.loads(run.stdout)["outputs"]
    if len(outputs) != len(listed):
        sys.exit(f"{len(listed)} expressions gave {len(outputs)} outputs:\n{run.stdout[:2000]}")
    wrong = 0
    for check, output in zip(listed, outputs):
        words = differences(check, output)
        if words is not None:
            wrong += 1
            print(f"{check.name}: `{check.expression}` {words}\n  source: {check.source}; tolerance {check.tolerance:g}")
    versions = f"NumPy {np.__version__}, pandas {pd.__version__}, SciPy {scipy.__version__}"
    print(f"{len(listed) - wrong} checks passed, {wrong} failed ({versions})")
    sys.exit(1 if wrong else 0)


if __name__ == "__main__":
    main()
