"""A page of sections, written as one HTML file that needs nothing besides itself.

No script, no network, no clock: styles, pictures and tables' files lie within the page, and its own
policy forbids it to fetch anything. All text is escaped by the template. The same content gives the
same bytes.
"""

from __future__ import annotations

import base64
import hashlib
import os
import re
from collections.abc import Sequence
from dataclasses import dataclass
from typing import ClassVar

from simimg.errors import mistake
from simimg.newfile import check_new_file
from simimg.show.reporttable import Table, plain_text
from simimg.version import __version__

_WORD = re.compile(r"[^A-Za-z0-9._-]+")


@dataclass(frozen=True)
class Words:
    """A paragraph.

    Attributes
    ----------
    text : str
    lead : bool
        Whether it is set larger: what a hurried reader takes away.
    """

    text: str
    lead: bool = False
    kind: ClassVar[str] = "words"


@dataclass(frozen=True)
class Items:
    """A list of sentences."""

    items: tuple[str, ...]
    kind: ClassVar[str] = "items"


@dataclass(frozen=True)
class Tables:
    """A table, with its file."""

    table: Table
    kind: ClassVar[str] = "table"


@dataclass(frozen=True)
class Picture:
    """A picture of a page.

    Attributes
    ----------
    key : str
        A word that names it in the page.
    source : str
        The picture itself as a data URI.
    alt : str
        What it shows, for those who do not see it.
    caption : str
    width, height : int
        Dots.
    """

    key: str
    source: str
    alt: str
    caption: str
    width: int
    height: int


@dataclass(frozen=True)
class Pictures:
    """Pictures beside one another where the page is wide."""

    pictures: tuple[Picture, ...]
    kind: ClassVar[str] = "pictures"


@dataclass(frozen=True)
class Listing:
    """Text as it is, line by line, such as a scene or a command; to be taken away as a file.

    Attributes
    ----------
    label : str
        What it is.
    text : str
    file : File or None
    """

    label: str
    text: str
    file: File | None = None
    kind: ClassVar[str] = "listing"


@dataclass(frozen=True)
class File:
    """A file within the page.

    Attributes
    ----------
    name : str
        As which it is saved.
    source : str
        A data URI.
    size : int
        Bytes.
    """

    name: str
    source: str
    size: int


@dataclass(frozen=True)
class Files:
    """Files within the page, by name."""

    files: tuple[File, ...]
    kind: ClassVar[str] = "files"


Block = Words | Items | Tables | Pictures | Listing | Files


@dataclass(frozen=True)
class Section:
    """A part of a page under a heading.

    Attributes
    ----------
    key : str
        A word that names it.
    heading : str
    blocks : tuple of Block
    """

    key: str
    heading: str
    blocks: tuple[Block, ...]


@dataclass(frozen=True)
class Page:
    """All that a page says.

    Attributes
    ----------
    title : str
        Of the scene.
    kind : str
        What the page is: "Report", say.
    stem : str
        With which the names of its files begin.
    cautions : tuple of str
        What must be said before anything else.
    sections : tuple of Section
    identity : str
        sha256 of the scene.
    """

    title: str
    kind: str
    stem: str
    cautions: tuple[str, ...]
    sections: tuple[Section, ...]
    identity: str


def section(key: str, heading: str, *blocks: Block | None) -> Section:
    """A section of those blocks that are there."""
    return Section(key, heading, tuple(block for block in blocks if block is not None))


def items(texts: Sequence[str]) -> Items | None:
    """A list, or nothing."""
    return Items(tuple(texts)) if texts else None


def file_of(name: str, content: bytes, *, kind: str = "text/plain;charset=utf-8") -> File:
    """Bytes as a file within the page."""
    held = base64.b64encode(content).decode("ascii")
    return File(file_name(name), f"data:{kind};base64,{held}", len(content))


def csv_file(stem: str, table: Table) -> File:
    """A table as a file within the page."""
    name = f"{stem}-{table.key}-simulated.csv"
    return file_of(name, table.csv().encode(), kind="text/csv;charset=utf-8")


def file_name(name: str) -> str:
    """A name that every system takes as a file's: letters, digits, dots, hyphens."""
    kept = _WORD.sub("-", name.replace("\\", "/").rsplit("/", 1)[-1]).strip("-.")
    return kept[:80] or "file"


def check_page(path: str | os.PathLike[str], *, overwrite: bool = False) -> list[str]:
    """What forbids writing a page to this file; empty when nothing does."""
    lines = check_new_file(path, overwrite=overwrite)
    shown = os.fspath(path)
    if not shown.lower().endswith((".html", ".htm")) and "\0" not in shown:
        lines.append(mistake(shown, "", "a report is a page", "end the name in .html"))
    return lines


def page_html(page: Page) -> str:
    """The page as HTML."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    environment = Environment(
        loader=PackageLoader("simimg.show", "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
        keep_trailing_newline=True,
    )
    environment.filters["clean"] = plain_text
    assert environment.loader is not None
    style, _, _ = environment.loader.get_source(environment, "report.css")
    digest = base64.b64encode(hashlib.sha256(style.encode()).digest()).decode("ascii")
    tables = [
        block.table for part in page.sections for block in part.blocks if isinstance(block, Tables)
    ]
    return environment.get_template("report.html").render(
        page=page,
        style=style,
        style_digest=digest,
        version=__version__,
        files={one.key: csv_file(page.stem, one) for one in tables},
    )
