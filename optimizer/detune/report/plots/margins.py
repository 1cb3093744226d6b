"""Margins of every requirement of the answer, the least at the top."""

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from detune.report.plots.style import BLACK, BLUE, GREY, VERMILION, Titles, shorten
from detune.report.words import limit_text, margin_text, value_text
from detune.study.run import Result

if TYPE_CHECKING:
    from matplotlib.figure import Figure

TITLE = "Margins"
SHOWN = 40
# Beyond this a margin says no more than that it is large.
LARGE = 2.0
LEAST = -1.2
ROW = 0.215
# Met, met by far, missed, missed by far: marker, its size and when.
MARKS: tuple[tuple[str, float, Callable[[float], bool]], ...] = (
    ("o", 20.0, lambda margin: 0.0 <= margin <= LARGE),
    (">", 22.0, lambda margin: margin > LARGE),
    ("X", 30.0, lambda margin: LEAST <= margin < 0.0),
    ("<", 22.0, lambda margin: margin < LEAST),
)


@dataclass(frozen=True)
class MarginsData:
    """Requirements by ascending margin: labels, margins (dimensionless), and value against limit in words.

    `subject` says whose they are; `left_out` is how many larger ones are not shown.
    """

    subject: str
    labels: tuple[str, ...]
    margins: tuple[float, ...]
    texts: tuple[str, ...]
    left_out: int


def data(result: Result) -> MarginsData | None:
    """Return the numbers of the plot, None where no design was assessed."""
    subject = result.subject
    if subject is None:
        return None
    rows = sorted(subject.margins, key=lambda row: row.margin)
    kept = rows[: max(SHOWN, sum(row.margin < 0.0 for row in rows))]
    return MarginsData(
        subject="the answer" if result.answer is not None else "the closest design",
        labels=tuple(row.label for row in kept),
        margins=tuple(row.margin for row in kept),
        texts=tuple(f"{value_text(row)}; {limit_text(row)}; {margin_text(row.margin)}" for row in kept),
        left_out=len(rows) - len(kept),
    )


def caption(data: MarginsData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"Margins of {data.subject}: limit / value - 1 for an upper limit, value / limit - 1 for a lower one, the "
        f"lesser of both for a window; zero is the limit. Margins above {100.0 * LARGE:.0f} % stand at the arrow."
    )
    return f"{text} {data.left_out} larger ones are in the table." if data.left_out else text


def size(data: MarginsData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 9.6, ROW * len(data.labels) + 0.75


def draw(data: MarginsData, figure: "Figure") -> Titles:
    """Draw the margins."""
    width, height = size(data)
    ax = figure.add_axes((4.15 / width, 0.5 / height, 2.75 / width, 1.0 - 0.7 / height))
    places = range(len(data.labels))
    low = min(-0.1, *(max(margin, LEAST) for margin in data.margins)) * 1.1
    ends = [100.0 * min(max(margin, LEAST), LARGE) for margin in data.margins]
    for marker, size_, wanted in MARKS:
        at = [place for place in places if wanted(data.margins[place])]
        colour = BLUE if marker in "o>" else VERMILION
        if at:
            ax.hlines(at, 0.0, [ends[place] for place in at], color=colour, linewidth=1.2)
            ax.scatter(
                [ends[place] for place in at],
                at,
                s=size_,
                marker=marker,
                color=colour,
                linewidths=0,
                zorder=3,
            )
    for place in places:
        ax.text(1.03, place, data.texts[place], transform=ax.get_yaxis_transform(), va="center", fontsize=7.5)
    ax.axvline(0.0, color=BLACK, linewidth=1.0)
    ax.set_yticks(list(places), [shorten(label, 74) for label in data.labels], fontsize=7.5)
    ax.set_ylim(len(data.labels) - 0.4, -0.6)
    ax.set_xlim(100.0 * low, 106.0 * LARGE)
    ax.set_xlabel("margin [%]; 0 is the limit")
    ax.xaxis.set_label_coords(0.5, -0.28 / (height - 0.7))
    ax.tick_params(axis="y", length=0)
    ax.spines["left"].set_visible(False)
    ax.grid(axis="x", color="#DDDDDD", linewidth=0.5)
    ax.set_axisbelow(True)
    ax.text(
        1.03,
        -0.65,
        "value; limit; margin",
        transform=ax.get_yaxis_transform(),
        va="bottom",
        fontsize=7.5,
        color=GREY,
    )
    return {}
