"""Figures inside the report: each panel an SVG of its own, so that panels stack on a phone, with a text alternative.

Colours become the page's own, which a dark screen changes; ids get the panel's name, so that no two drawings share one.
"""

import re
from dataclasses import dataclass
from html import escape

import numpy as np
from matplotlib.transforms import Bbox

from studies.answer import Answer
from studies.errors import inert
from studies.figures import as_file, drawn
from studies.job import Asked
from studies.palette import LIGHT

COLOR_BAR = "<colorbar>"  # what the drawing library calls it
PADDING = 0.06  # inches around a panel
IDS = re.compile(r'\bid="([^"]+)"')
LINKS = re.compile(r'((?:xlink:)?href="|url\()#')
STYLE = re.compile(r"<style[^>]*>.*?</style>", re.S)
TAG = re.compile(r"<[^>]+>")
METADATA = re.compile(r"<metadata>.*?</metadata>", re.S)
VIEW_BOX = re.compile(r'viewBox="([-\d. ]+)"')
NAMES = {value: color for color, value in LIGHT.items() if color != "hatch"} | {"#000000": "ink"}
PATTERN = re.compile(r"<pattern.*?</pattern>", re.S)
COLORS = re.compile("|".join(rf"{value}\b" for value in NAMES), re.I)
PIXELS = 4 / 3  # of the page, per point
LINE_ENDS = "stroke-linejoin:round;stroke-linecap:butt"  # what the removed style said, for this drawing alone


@dataclass(frozen=True, kw_only=True)
class Panel:
    """One drawing.

    name : unique in the page; width : natural width in pixels of the page
    svg : its markup, made by the drawing library, text already escaped
    """

    name: str
    width: float
    svg: str


@dataclass(frozen=True, kw_only=True)
class Figure:
    """An answer's figure: its title, which states the conditions, and its panels. file : name without its ending"""

    title: str
    file: str
    panels: tuple[Panel, ...]


def figure_of(asked: Asked, answer: Answer, number: int) -> Figure | None:
    """The figure of an answer, by its kind; None where there is none. number : of the answer in the report"""
    with drawn(asked, answer) as made:
        if made is None:
            return None
        figure, title = made
        figure.suptitle("")  # the page says it
        groups = _groups(figure)
        panels = []
        for place, group in enumerate(groups, start=1):
            for axes in figure.axes:
                axes.set_visible(axes in group)
            name = f"figure-{number}-{place}"
            said = _alternative(group, title.replace("\n", "; "))
            svg = _svg(figure, group)
            panels.append(Panel(name=name, width=_size(svg)[1], svg=_inline(svg, name, *said)))
        return Figure(title=title.replace("\n", "; "), file=inert(asked.name), panels=tuple(panels))


def _groups(figure) -> list[list]:
    """Axes that belong together: those that share a place, as a curve and its second axis do, and colour bars."""
    groups: dict[tuple, list] = {}
    for axes in figure.axes:
        if axes.get_label() == COLOR_BAR and groups:
            list(groups.values())[-1].append(axes)
        else:
            groups.setdefault(tuple(np.round(axes.get_position().bounds, 6)), []).append(axes)
    return list(groups.values())


def _svg(figure, group) -> str:
    renderer = figure.canvas.get_renderer()
    box = Bbox.union([axes.get_tightbbox(renderer) for axes in group]).transformed(figure.dpi_scale_trans.inverted())
    return as_file(figure, "svg", box.padded(PADDING)).decode()


def _alternative(group, title: str) -> tuple[str, ...]:
    """Title and description of a panel in words: what stands against what, which curves, and over which range."""
    first = group[0]
    said = [axes.get_title() for axes in group if axes.get_title()]
    said += [f"{axes.get_ylabel()} against {first.get_xlabel()}" for axes in group if axes.get_ylabel()]
    handles = [text.get_text() for axes in group if axes.get_legend() for text in axes.get_legend().get_texts()]
    ends = first.get_ylim()
    drawn_as = f"Shown: {'; '.join(handles)}. " if handles else ""
    reach = f"The vertical axis runs from {min(ends):.3g} to {max(ends):.3g}. "
    if first.get_yscale() == "logit":
        reach = "The vertical axis is stretched towards 0 and 100 %. "
    words = f"{', '.join(said)}. {title}", f"{drawn_as}{reach}The numbers are in the table below."
    return tuple(inert(text.replace(r"\$", "$")) for text in words)


def _inline(svg: str, name: str, title: str, description: str) -> str:
    """A drawing's markup as part of a page: scoped ids and styles, the page's colours, no fixed size, described."""
    svg = STYLE.sub("", METADATA.sub("", svg[svg.index("<svg") :]))
    svg = TAG.sub(lambda tag: _of_page(tag[0], name), svg)
    svg = PATTERN.sub(lambda pattern: pattern[0].replace("var(--ink)", "var(--hatch)"), svg)
    box, width, height = _size(svg)
    said = f'<title id="{name}-title">{escape(title)}</title><desc id="{name}-description">{escape(description)}</desc>'
    return (
        f'<svg viewBox="{box}" width="{width:.0f}" height="{height:.0f}" role="img" style="{LINE_ENDS}" '
        f'aria-labelledby="{name}-title {name}-description">{said}{svg[svg.index(">") + 1 :]}'
    )


def _size(svg: str) -> tuple[str, float, float]:
    """A drawing's box, and its natural width and height in pixels of the page."""
    box = VIEW_BOX.search(svg)[1]
    return box, *(float(size) * PIXELS for size in box.split()[2:])


def _of_page(tag: str, name: str) -> str:
    """A tag with ids of its own panel and the page's colours; text between tags is never touched."""
    tag = LINKS.sub(lambda link: f"{link[1].replace('xlink:', '')}#{name}-", IDS.sub(rf'id="{name}-\1"', tag))
    return COLORS.sub(lambda color: f"var(--{NAMES[color[0].lower()]})", tag)
