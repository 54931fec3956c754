"""The standing texts of the report: what each figure shows, how to read it, what it does not say.

The cautions are those that every output for users carries, word for word.
"""

from dataclasses import dataclass

CAUTIONS = (
    "Research use; no medical device, no basis for a clinical or surgical decision; animal and "
    "human work only under the approvals that apply where it is done, by people trained for it.",
    "A lead in time is not proof of a projection: unrecorded common input can make one.",
    "Arrival order alone is not direction of influence.",
)
CHOSEN_HERE = (
    "These windows were chosen by looking at the same trials: {names}. The p-values do not "
    "account for it."
)


@dataclass(frozen=True, slots=True)
class SectionText:
    """One section of the page."""

    title: str
    figures: tuple[tuple[str, str], ...]  # name of the sheet, alternative text
    tables: tuple[str, ...]  # names of the tables
    how: str
    limits: str


SECTIONS = (
    SectionText(
        title="Evoked waves",
        figures=(
            (
                "averages",
                "Averages of the signal that stands for each area, areas one below the other on "
                "one time axis, with interval bands and shaded windows.",
            ),
            (
                "waves",
                "The same averages window by window, close up, with marks at trough or peak and "
                "onset and their intervals.",
            ),
        ),
        tables=("latencies",),
        how="Each curve is the mean over the trials of a condition; its band covers the mean at "
        "each sample by itself. Filled marks: trough or peak; open marks: onset, where the flank "
        "crosses the stated fraction of it; bars along time: intervals from resampled trials. "
        "Sinks are negative. The curves carry the least smoothing of any window, the marks that "
        "of their own.",
        limits="The onset is that of the stated fraction and not the physical beginning of the "
        "current; waves of unequal shape differ in it without differing in arrival. A wave that "
        "is not found may still be there: too small for these trials, or at another depth. One "
        "contact stands for an area in all windows; where the current of a window enters "
        "elsewhere, the note says at which depth, and the rows of single contacts (under Current "
        "by depth) show the LFP there.",
    ),
    SectionText(
        title="Lags between areas",
        figures=(
            (
                "lags",
                "Lags between areas with intervals, a panel a window, a line a pair and condition, "
                "with a zero line.",
            ),
        ),
        tables=("lags",),
        how="Each mark is the time of the second area minus that of the first, on the same "
        "resampled trials: right of the zero line the first area is earlier. q is the false "
        "discovery rate over all rows of the same feature.",
        limits="An order in time is not an influence: both areas may be driven by a third. Lags "
        "of onsets suppose waves of like shape.",
    ),
    SectionText(
        title="Current by depth",
        figures=(
            (
                "depth",
                "Current source density by depth and time, an area a row, a condition a column; "
                "sinks orange, sources purple, with the strongest sink of each window marked.",
            ),
            (
                "contacts",
                "Time of trough or peak of the LFP at each contact by depth, with intervals.",
            ),
        ),
        tables=("sinks", "contacts"),
        how="The surface is up. Orange: sinks (negative), purple: sources, in uA/mm^3, one scale "
        "an area. Circles: strongest sink of each window, bars: intervals of its depth and time. "
        "Crosses: bad contacts, filled in along depth. In the lower figure open marks are not "
        "reliable and may lie beyond the axis.",
        limits="The density supposes currents that spread widely at right angles to the array and "
        "an even conductivity; at the array's ends it rests on a duplicated contact. A sink is "
        "where current enters, not proof of a synapse there.",
    ),
    SectionText(
        title="Firing",
        figures=(
            (
                "firing",
                "Firing rate of each area with interval bands, and below it the spikes of one of "
                "its units, trial by trial.",
            ),
        ),
        tables=("firing",),
        how="Rates are means over the area's units; bands are intervals over trials. The raster "
        "shows the unit with most spikes in the windows. The change is the rate in the window "
        "minus that in the baseline; rise and fall are called at q <= .05.",
        limits="A rate averaged over a window hides a rise and a fall that follow one another in "
        "it. Sorted units are taken as they come; their isolation is not examined.",
    ),
    SectionText(
        title="Spikes and field",
        figures=(),
        tables=("coupling",),
        how="Each unit against the field of a contact that is not its own. The value stands "
        "beside that of shuffled trials (null), which keeps what both owe to the stimulus; p is "
        "against the shuffles.",
        limits="Coupling to a field is not coupling to the area's own cells: fields spread. "
        "Bands that the window cannot hold are not estimated; coupling.csv gives each reason.",
    ),
    SectionText(
        title="Direction",
        figures=(
            (
                "lead",
                "Net lead of each pair of areas with intervals and the verdict in words, a panel a "
                "window, with a zero line.",
            ),
        ),
        tables=("verdicts", "direction"),
        how="Net is Granger causality from the first area to the second minus the reverse, minus "
        "the same in reversed time; positive: the first area leads. A lead is claimed where "
        "random time reversal of trials gives q <= .05 and the net changes sign in reversed time. "
        "The interval is not that test and may hold 0 beside a lead that is claimed. "
        "Pale bars: net values that these trials would have missed in more than 20 % of cases.",
        limits="No lead shown is not no lead. Lagged input from an area that was not recorded, or "
        "amplifiers with unequal delays, make a lead where there is no influence.",
    ),
)
