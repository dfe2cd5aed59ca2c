"""One self-contained page from sections: markup, style, data and program in a single file."""

import base64
import re
from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field
from importlib import resources
from typing import Any

from hmmseg.report.drawing import svg_of
from hmmseg.report.packing import plain_json
from hmmseg.report.parts import Item, Picture, Section

__all__ = ["Page"]

_OWN = ("data.js", "records.js", "regions.js", "map.js")
_LIBRARY = ("bokeh.min.js", "bokeh-api.min.js")


@dataclass(frozen=True)
class Page:
    """A page to be written.

    Attributes
    ----------
    title : str
        Its heading.
    lead : str
        A line below it.
    foot : str
        The last line.
    sections : list of Section
        What it says.
    data : dict or None
        For the map; None for a page without one.
    blobs : list of (str, str)
        Packed arrays by the name of their element.
    links : list of (str, str)
        Further entries of the list of sections: text and target.
    """

    title: str
    lead: str
    foot: str
    sections: Sequence[Section]
    data: dict[str, Any] | None = None
    blobs: Sequence[tuple[str, str]] = ()
    links: Sequence[tuple[str, str]] = field(default_factory=tuple)

    def html(self) -> str:
        """Return the whole file."""
        from jinja2 import Environment, StrictUndefined  # noqa: PLC0415 - start-up time
        from markupsafe import Markup  # noqa: PLC0415

        environment = Environment(
            autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True
        )
        environment.filters["groups"] = _groups
        environment.globals.update(image=_image, width=_width)
        template = environment.from_string(_text("page.html"))
        with_map = self.data is not None
        # Our own files are markup; all else is text and is escaped.
        return template.render(
            title=self.title,
            lead=self.lead,
            foot=self.foot,
            sections=self.sections,
            links=self.links,
            css=Markup(_text("page.css")),
            data=Markup(plain_json(self.data)) if with_map else "",
            blobs=self.blobs,
            scripts=[Markup(script) for script in _scripts()] if with_map else [],
        )


def _text(name: str) -> str:
    return resources.files("hmmseg.report").joinpath("template", name).read_text(encoding="utf-8")


def _scripts() -> Iterator[str]:
    """Yield the drawing library, which a package carries, and the page's own program."""
    library = resources.files("bokeh").joinpath("server", "static", "js")
    for name in _LIBRARY:
        yield library.joinpath(name).read_text(encoding="utf-8")
    for name in _OWN:
        yield _text(name)


def _image(picture: Picture) -> str:
    """Return a figure as a data URL: nothing in an image can run."""
    coded = base64.b64encode(svg_of(picture.drawing)).decode("ascii")
    return f"data:image/svg+xml;base64,{coded}"


def _width(picture: Picture) -> int:
    """Return the width of a figure in pixels, at which its letters have their size."""
    found = re.search(rb'<svg[^>]* width="([0-9.]+)pt"', svg_of(picture.drawing))
    return round(float(found[1]) * 4 / 3) if found else 640


def _groups(items: Sequence[Item]) -> list[dict[str, Any]]:
    """Put neighbouring figures together, so that they can stand side by side."""
    groups: list[dict[str, Any]] = []
    for item in items:
        figures = isinstance(item, Picture)
        if not groups or groups[-1]["figures"] != figures:
            groups.append({"figures": figures, "items": []})
        groups[-1]["items"].append(item)
    return groups
