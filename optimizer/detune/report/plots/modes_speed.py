"""Natural frequencies against the excitation over speed: where an order meets a mode."""

from dataclasses import dataclass
from typing import TYPE_CHECKING

from detune.brief.brief import Brief
from detune.report.plots.style import (
    BLACK,
    BLUE,
    GREY,
    LIGHT,
    LINES,
    VERMILION,
    Titles,
    revolutions_above,
    shorten,
    spread,
)
from detune.report.words import separation_text
from detune.response.direct_supremum import tones_of
from detune.study.run import Result

if TYPE_CHECKING:
    from matplotlib.axes import Axes
    from matplotlib.figure import Figure

TITLE = "Modes against excitation"
SHOWN = 4
PANEL_HEIGHT = 4.4


@dataclass(frozen=True)
class Range:
    """The speeds of one source in one condition, Hz; `orders` are those that act in it."""

    condition: str
    steady: bool
    low: float
    high: float
    orders: tuple[float, ...]


@dataclass(frozen=True)
class Source:
    """One moving speed (or one frequency) with its ranges."""

    name: str
    is_shaft: bool
    ranges: tuple[Range, ...]

    @property
    def orders(self) -> tuple[float, ...]:
        """Every order in any condition."""
        return tuple(sorted({order for span in self.ranges for order in span.orders}))

    @property
    def top(self) -> float:
        """Highest speed."""
        return max(span.high for span in self.ranges)


@dataclass(frozen=True)
class ModesData:
    """Natural frequencies Hz with names and separations (None where no steady condition excites), and the sources."""

    subject: str
    frequencies: tuple[float, ...]
    names: tuple[str, ...]
    separations: tuple[float | None, ...]
    exempt: tuple[bool, ...]
    sources: tuple[Source, ...]
    left_out: int

    def crossings(self, source: Source) -> tuple[tuple[float, float, bool], ...]:
        """Return (speed, frequency, steady) wherever an order of the source meets a mode within its range."""
        found = []
        for span in source.ranges:
            for order in span.orders:
                for frequency in self.frequencies:
                    speed = frequency / order
                    if span.low <= speed <= span.high:
                        found.append((speed, frequency, span.steady))
        return tuple(found)


def data(result: Result) -> ModesData | None:
    """Return the numbers of the plot, None where nothing has a speed or no design was assessed."""
    subject = result.subject
    sources = excitation_sources(result.study.brief)
    if subject is None or not sources:
        return None
    return ModesData(
        subject="the answer" if result.answer is not None else "the closest design",
        frequencies=tuple(mode.frequency for mode in subject.modes),
        names=tuple(mode.name for mode in subject.modes),
        separations=tuple(mode.separation for mode in subject.modes),
        exempt=tuple(mode.exempt for mode in subject.modes),
        sources=sources[:SHOWN],
        left_out=max(0, len(sources) - SHOWN),
    )


def excitation_sources(brief: Brief) -> tuple[Source, ...]:
    """Return every speed of the brief, shafts first, with its range in each condition."""
    spans: dict[str, list[Range]] = {}
    shafts = {shaft for condition in brief.conditions for shaft in condition.shafts}
    for condition in brief.conditions:
        by_speed: dict[str, dict[str, object]] = {}
        orders: dict[str, set[float]] = {}
        for tone in tones_of(brief, condition):
            orders.setdefault(tone.speed, set()).add(tone.order)
            by_speed[tone.speed] = {"low": tone.low, "high": tone.high}
            spans.setdefault(tone.speed, [])
        for name, acting in orders.items():
            low, high = by_speed[name]["low"], by_speed[name]["high"]
            assert isinstance(low, float) and isinstance(high, float)
            spans[name].append(Range(condition.name, condition.steady, low, high, tuple(sorted(acting))))
    ranked = sorted(spans, key=lambda name: name not in shafts)
    return tuple(Source(name, name in shafts, tuple(spans[name])) for name in ranked)


def caption(data: ModesData) -> str:
    """Return what the plot shows, in words."""
    text = (
        f"Horizontal lines: undamped natural frequencies of {data.subject} at the dynamic stiffness. Sloping lines: "
        "excitation frequency of each order of the speed. Grey: the range of steady running, against which "
        "separation counts; hatched: conditions passed through, judged by response alone. A dot marks where an order "
        "meets a mode inside a range (filled: steady)."
    )
    return f"{text} {data.left_out} further sources are not drawn." if data.left_out else text


def size(data: ModesData) -> tuple[float, float]:
    """Return width and height in inches."""
    return 8.6, PANEL_HEIGHT * max(1, len(data.sources))


def draw(data: ModesData, figure: "Figure") -> Titles:
    """Draw one panel a source."""
    width, height = size(data)
    for index, source in enumerate(data.sources):
        bottom = (height - (index + 1) * PANEL_HEIGHT + 0.42) / height
        ax = figure.add_axes((0.65 / width, bottom, (width - 3.25) / width, (PANEL_HEIGHT - 1.0) / height))
        _panel(data, source, ax)
    return {}


def _panel(data: ModesData, source: Source, ax: "Axes") -> None:
    right = 1.12 * source.top
    top = 1.08 * max([*data.frequencies, *(o * s.high for s in source.ranges for o in s.orders)])
    lowest = min(data.frequencies)
    # A few very high orders or modes must not squeeze the others onto the axis.
    is_log = top / max(lowest, 1e-9) > 25.0
    bottom = 0.6 * min(lowest, *(o * s.low for s in source.ranges for o in s.orders)) if is_log else 0.0
    for span in source.ranges:
        _span(ax, span)
    for index, order in enumerate(source.orders):
        colour, style = LINES[(index + 1) % len(LINES)]
        start = bottom / order
        ax.plot([start, right], [start * order, right * order], color=colour, linestyle=style, linewidth=1.1)
        end = min(right, top / order)
        ax.annotate(
            f"order {order:g}", (end, end * order), xytext=(-10, -9), textcoords="offset points",
            ha="left" if end < 0.9 * right else "right", va="top", fontsize=7.5, color=colour,
            bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.6, "alpha": 0.85},
        )  # fmt: skip
    for frequency in data.frequencies:
        ax.axhline(frequency, color=BLUE, linewidth=0.9, zorder=3)
    for speed, frequency, steady in data.crossings(source):
        face = VERMILION if steady else "white"
        ax.plot(
            [speed], [frequency], marker="o", markersize=5, color=VERMILION, markerfacecolor=face, zorder=5
        )
    ax.set_xlim(0.0, right)
    ax.set_ylim(bottom, top)
    if is_log:
        ax.set_yscale("log")
    _mode_labels(ax, data, is_log)
    if source.is_shaft:
        revolutions_above(ax)
    ax.set_xlabel(f"speed of {source.name} [Hz]" if source.is_shaft else f"frequency of {source.name} [Hz]")
    ax.set_ylabel("frequency [Hz]")


def _span(ax: "Axes", span: Range) -> None:
    words = f"{span.condition}" if span.steady else f"{span.condition} (passing)"
    if span.high > span.low:
        if span.steady:
            ax.axvspan(span.low, span.high, color=LIGHT, linewidth=0, zorder=0)
        else:
            ax.axvspan(
                span.low, span.high, facecolor="none", edgecolor="#D2D2D2", hatch="//", linewidth=0, zorder=0
            )
    else:
        ax.axvline(span.low, color="#BBBBBB", linewidth=3.0 if span.steady else 1.0, zorder=0)
    ax.text(
        0.5 * (span.low + span.high), 0.985, words, transform=ax.get_xaxis_transform(), ha="center", va="top",
        fontsize=8, color=BLACK, zorder=6, bbox={"facecolor": "white", "edgecolor": "none", "pad": 1.0, "alpha": 0.85},
    )  # fmt: skip


def _mode_labels(ax: "Axes", data: ModesData, is_log: bool) -> None:
    """Name each mode at the right edge; labels that would overlap are moved apart with a thin leader."""
    transform = ax.transData
    high = ax.transAxes.transform((0.0, 1.0))[1]
    low = ax.transAxes.transform((0.0, 0.0))[1]
    wanted = [(transform.transform((0.0, f))[1] - low) / (high - low) for f in data.frequencies]
    figure = ax.get_figure()
    assert figure is not None
    inches = (high - low) / figure.dpi
    placed = spread(wanted, 0.155 / inches, 0.0, 1.0)
    for place, want, frequency, name, separation, exempt in zip(
        placed, wanted, data.frequencies, data.names, data.separations, data.exempt, strict=True
    ):
        text = f"{frequency:.4g} Hz {shorten(name, 18)}"
        if separation is not None:
            text += f", {separation_text(separation)}" + (" exempt" if exempt else "")
        ax.annotate(
            text, (1.0, want), xytext=(1.05, place), xycoords="axes fraction", textcoords="axes fraction",
            va="center", fontsize=7.5, annotation_clip=False,
            arrowprops={"arrowstyle": "-", "linewidth": 0.5, "color": GREY, "shrinkA": 1.0, "shrinkB": 0.0,
                        "relpos": (0.0, 0.5)},
        )  # fmt: skip
    ax.text(
        1.05, 1.045, "natural frequency, mode, separation", transform=ax.transAxes, fontsize=7.5, color=GREY
    )
