"""What a page is put together from: sections, and the things that stand in them."""

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

__all__ = [
    "Item",
    "Map",
    "Missing",
    "Numbers",
    "Part",
    "Picture",
    "Section",
    "Table",
    "Text",
]


@dataclass(frozen=True)
class Text:
    """A paragraph.

    Attributes
    ----------
    text : str
        Plain text.
    style : str
        ``plain``, ``note``, or ``quote`` for what may be pasted elsewhere.
    """

    text: str
    style: str = "plain"
    kind = "text"


@dataclass(frozen=True)
class Numbers:
    """A few numbers that stand out.

    Attributes
    ----------
    numbers : list of (str, str)
        Each with what it counts.
    """

    numbers: Sequence[tuple[str, str]]
    kind = "numbers"


@dataclass(frozen=True)
class Table:
    """A table.

    Attributes
    ----------
    columns : list of str
        Heads.
    rows : list of list of str
        Cells.
    caption : str
        What the table shows.
    words : int
        How many of the first columns hold words; the others hold numbers.
    folded : str
        What to click to see it; an empty one for a table that is open.
    """

    columns: Sequence[str]
    rows: Sequence[Sequence[str]]
    caption: str
    words: int = 1
    folded: str = ""
    kind = "table"


@dataclass(frozen=True, eq=False)
class Picture:
    """A figure.

    Attributes
    ----------
    name : str
        Of its file.
    caption : str
        What it shows.
    drawing : Figure or bytes
        A matplotlib figure, or the SVG that a stage has drawn already.
    wide : bool
        Whether it takes the width of the page.
    """

    name: str
    caption: str
    drawing: Any
    wide: bool = False
    kind = "picture"


@dataclass(frozen=True)
class Missing:
    """A stage that was not run.

    Attributes
    ----------
    what : str
        What would stand here.
    command : str
        What to run.
    """

    what: str
    command: str
    kind = "missing"


@dataclass(frozen=True)
class Map:
    """The map of all records, which the page's own program draws."""

    kind = "map"


Item = Text | Numbers | Table | Picture | Missing | Map


@dataclass(frozen=True)
class Part:
    """One question within a section.

    Attributes
    ----------
    title : str
        The question's name; an empty one for what needs none.
    items : list of Item
        What answers it.
    conclusion : str
        What a reader should conclude.
    """

    title: str
    items: Sequence[Item]
    conclusion: str = ""


@dataclass(frozen=True)
class Section:
    """One section of the page.

    Attributes
    ----------
    anchor : str
        Its name in links.
    title : str
        Its heading.
    conclusion : str
        What a reader should conclude, in a sentence or two.
    parts : list of Part
        What stands below.
    """

    anchor: str
    title: str
    conclusion: str
    parts: Sequence[Part] = field(default_factory=list)

    def pictures(self) -> list[Picture]:
        """Return all figures."""
        return [item for part in self.parts for item in part.items if isinstance(item, Picture)]
