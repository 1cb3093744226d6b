"""Plots as SVG and PNG files that come out the same every time, without any global plotting state."""

import io
import re
from collections.abc import Mapping
from dataclasses import dataclass
from html import escape
from types import ModuleType
from typing import Any

from detune.report.plots import PLOTS
from detune.report.plots.style import RESOLUTION, settings
from detune.study.run import Result


@dataclass(frozen=True)
class Drawn:
    """One finished plot: its name in `PLOTS`, title, caption, the SVG as a file and the PNG."""

    name: str
    title: str
    caption: str
    svg: str
    png: bytes

    @property
    def inline(self) -> str:
        """The SVG to stand inside a page: no prolog, no name spaces, scaled to the width of its place."""
        body = self.svg[self.svg.index("<svg") :]
        head, rest = body[: body.index(">") + 1], body[body.index(">") + 1 :]
        box = re.search(r'viewBox="[^"]*"', head)
        assert box is not None
        return f'<svg class="plot" role="img" aria-label="{escape(self.title)}" {box.group()}>{rest}'


def draw_all(result: Result) -> tuple[Drawn, ...]:
    """Return every plot that has something to show for this result, in the order of `PLOTS`."""
    return draw_each(PLOTS, result)


def draw_each(plots: Mapping[str, ModuleType], result: object) -> tuple[Drawn, ...]:
    """Return those of some plots, by name, that have something to show for a result, in their order."""
    drawn = []
    for name, module in plots.items():
        data = module.data(result)
        if data is not None:
            drawn.append(draw_one(name, module, data))
    return tuple(drawn)


def draw_one(name: str, module: ModuleType, data: Any) -> Drawn:
    """Return one plot of given numbers."""
    import matplotlib
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.backends.backend_svg import FigureCanvasSVG
    from matplotlib.figure import Figure

    chosen: Any = {**settings(), "svg.hashsalt": f"detune {name}"}
    with matplotlib.rc_context(chosen):
        figure = Figure(figsize=module.size(data), dpi=RESOLUTION)
        FigureCanvasAgg(figure)
        titles = module.draw(data, figure)
        png = io.BytesIO()
        figure.savefig(png, format="png", metadata={"Software": None})
        FigureCanvasSVG(figure)
        svg = io.StringIO()
        figure.savefig(svg, format="svg", metadata={"Date": None, "Creator": None})
    return Drawn(
        name, module.TITLE, module.caption(data), _finished(svg.getvalue(), name, titles), png.getvalue()
    )


def _finished(svg: str, name: str, titles: dict[str, tuple[str, ...]]) -> str:
    """Drop the metadata, make identifiers unique to the plot, and give each titled marker its hover text."""
    svg = re.sub(r"\s*<metadata>.*?</metadata>", "", svg, flags=re.DOTALL)
    svg = svg.replace("'DejaVu Sans'", "'DejaVu Sans', Arial, Helvetica, sans-serif")
    for group, texts in titles.items():
        svg = _with_titles(svg, group, texts)
    svg = re.sub(r'\bid="', f'id="{name}-', svg)
    svg = re.sub(r'xlink:href="#', f'xlink:href="#{name}-', svg)
    return re.sub(r"url\(#", f"url(#{name}-", svg)


def _with_titles(svg: str, group: str, texts: tuple[str, ...]) -> str:
    """Put a title on each marker of the group with this identifier, in the order in which they were drawn."""
    start = svg.index(f'<g id="{group}"')
    end = _end_of_group(svg, start)
    part = svg[start:end]
    # A few markers are written out as paths, many are uses of one path.
    marker = r"<use\b[^>]*/>" if "<use" in part else r"<path\b[^>]*/>"
    count = len(re.findall(marker, part))
    if count != len(texts):
        raise ValueError(f"{group} has {count} markers in the SVG for {len(texts)} titles")
    waiting = iter(texts)

    def titled(match: re.Match[str]) -> str:
        return f"<g><title>{escape(next(waiting), quote=False)}</title>{match.group()}</g>"

    return svg[:start] + re.sub(marker, titled, part) + svg[end:]


def _end_of_group(svg: str, start: int) -> int:
    depth = 0
    for match in re.finditer(r"<g\b|</g>", svg[start:]):
        depth += 1 if match.group() == "<g" else -1
        if depth == 0:
            return start + match.end()
    raise ValueError("a group of the SVG is not closed")
