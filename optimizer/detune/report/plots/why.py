"""How many designs each requirement excluded, as the first one that they failed."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

from detune.report.plots.style import BLUE, GREY, Titles, shorten
from detune.study.run import Result

if TYPE_CHECKING:
    from matplotlib.figure import Figure

TITLE = "Designs excluded by each requirement"
ROW = 0.24
SHOWN = 24


@dataclass(frozen=True)
class WhyData:
    """Requirements with the number of designs each excluded first, most first, and how many designs met all."""

    labels: tuple[str, ...]
    counts: tuple[int, ...]
    met: int
    designs: int
    looked_at: int
    left_out: int


def data(result: Result) -> WhyData | None:
    """Return the numbers of the plot; a requirement judged in two stages counts once. None if nothing is excluded."""
    counts: dict[str, int] = {}
    for rule in result.outcome.record.rules:
        counts[rule.rule] = counts.get(rule.rule, 0) + rule.excluded
    ranked = sorted(((label, n) for label, n in counts.items() if n), key=lambda item: -item[1])
    if not ranked:
        return None
    record = result.outcome.record
    kept = ranked[:SHOWN]
    return WhyData(
        labels=tuple(label for label, _ in kept),
        counts=tuple(n for _, n in kept),
        met=record.met,
        designs=record.designs,
        looked_at=record.looked_at,
        left_out=len(ranked) - len(kept),
    )


def caption(data: WhyData) -> str:
    """Return what the plot shows, in words."""
    return (
        f"Of {data.designs} designs {data.looked_at} were looked at and {data.met} met every requirement. Each of the "
        "others is counted once, at the first requirement it failed in the order totals, statics, separation, "
        "response; it may fail later ones as well. The scale is logarithmic."
    )


def size(data: WhyData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, ROW * (len(data.labels) + 1) + 0.7


def draw(data: WhyData, figure: "Figure") -> Titles:
    """Draw the counts."""
    width, height = size(data)
    ax = figure.add_axes((4.0 / width, 0.5 / height, 4.0 / width, 1.0 - 0.6 / height))
    labels = [*data.labels, "met every requirement"]
    counts = [*data.counts, data.met]
    for place, count in enumerate(counts):
        ax.annotate(
            str(count),
            (max(count, 0.7), place),
            xytext=(7, 0),
            textcoords="offset points",
            va="center",
            fontsize=8,
        )
    drawn = [place for place, count in enumerate(counts[:-1]) if count]
    ax.hlines(drawn, 0.7, [counts[place] for place in drawn], color=BLUE, linewidth=1.4)
    ax.scatter([counts[place] for place in drawn], drawn, s=24, color=BLUE, linewidths=0, zorder=3)
    if data.met:
        ax.hlines([len(data.labels)], 0.7, [data.met], color=GREY, linewidth=1.4)
        ax.scatter([data.met], [len(data.labels)], s=26, marker="D", color=GREY, linewidths=0, zorder=3)
    ax.set_xscale("log")
    ax.set_xticks([10.0**n for n in range(13)], [f"{10**n}" if n < 7 else f"1e{n}" for n in range(13)])
    ax.set_xticks([], minor=True)
    ax.set_xlim(0.7, 4.0 * max(max(counts), 10))
    ax.set_ylim(len(labels) - 0.4, -0.6)
    ax.set_yticks(range(len(labels)), [shorten(label, 70) for label in labels], fontsize=7.5)
    ax.tick_params(axis="y", length=0)
    ax.set_xlabel("number of designs [-]")
    ax.grid(axis="x", color="#DDDDDD", linewidth=0.5)
    ax.set_axisbelow(True)
    return {}
