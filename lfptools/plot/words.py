"""Numbers and rows of tables in, the short texts that figures and reports print out."""

from math import floor, isfinite, log10

from lfptools.plot.marks import Row, number


def probability(value: float) -> str:
    """Return a p or q as ".0015"; an empty text where there is none."""
    if not isfinite(value):
        return ""
    return f"{value:.2g}".removeprefix("0") if value < 1 else "1"


def rounded(value: float, places: int) -> str:
    """Return a number with `places` decimals, never "-0"; an empty text where there is none."""
    return f"{round(value, places) + 0.0:.{places}f}" if isfinite(value) else ""


def with_interval(value: float, lo: float, hi: float, unit: str = "") -> str:
    """Return "14.1 ms [13.7, 14.5]", with the decimals that the interval's width bears.

    Half the width keeps one digit, or two where it begins with 1 or 2. Without an interval the
    value keeps 3 digits and says so; without a value the text is empty.
    """
    if not isfinite(value):
        return ""
    word = f" {unit}" if unit else ""
    if not (isfinite(lo) and isfinite(hi)):
        return f"{value:.3g}{word} [no interval]"
    half = (hi - lo) / 2
    places = min(max(-floor(log10(half / 3)), 0), 6) if half > 0 else 3
    bounds = f"[{rounded(lo, places)}, {rounded(hi, places)}]"
    return f"{rounded(value, places)}{word} {bounds}"


def cell(row: Row, column: str, lo: str, hi: str, unit: str = "") -> str:
    """Return the value of a column of a row with its interval from the columns `lo` and `hi`."""
    return with_interval(number(row, column), number(row, lo), number(row, hi), unit)


def verdict_words(row: Row) -> str:
    """Return the verdict of a row of verdicts.csv in words, for instance "S1 leads M1"."""
    if row["verdict"] != "leads":
        return str(row["verdict"])
    leader = row["leader"]
    follower = row["area_b"] if leader == row["area_a"] else row["area_a"]
    return f"{leader} leads {follower}"
