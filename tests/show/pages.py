"""A page as a reader's program takes it apart: elements, texts, tables, files within it."""

from __future__ import annotations

import base64
import csv
import io
from html.parser import HTMLParser

_EMPTY = {"meta", "link", "img", "br", "hr", "input"}


class Page(HTMLParser):
    """A page's elements in order, each with its attributes and its own text."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.elements = []
        self._open = []
        self.feed(text)
        self.close()
        assert self._open == [], "elements that are not closed"

    def handle_starttag(self, tag, attrs):
        assert len(dict(attrs)) == len(attrs), f"an attribute twice in {tag}"
        one = {
            "tag": tag,
            "attrs": dict(attrs),
            "text": "",
            "within": [e["tag"] for e in self._open],
        }
        self.elements.append(one)
        if tag not in _EMPTY:
            self._open.append(one)

    def handle_endtag(self, tag):
        assert self._open, f"</{tag}> closes nothing"
        assert self._open.pop()["tag"] == tag, f"</{tag}> closes another element"

    def handle_data(self, data):
        for one in self._open:
            one["text"] += data

    def all(self, *tags):
        """The elements of these kinds."""
        return [one for one in self.elements if one["tag"] in tags]

    def one(self, tag):
        """The only element of a kind."""
        (found,) = self.all(tag)
        return found

    def files(self):
        """Content of each file within the page, by the name it is saved under."""
        found = {}
        for link in self.all("a"):
            name = link["attrs"].get("download")
            if name is not None:
                kind, _, content = link["attrs"]["href"].partition(";base64,")
                assert kind.startswith("data:")
                assert name not in found, f"two files are called {name}"
                found[name] = base64.b64decode(content, validate=True)
        return found

    def table(self, ending):
        """Rows of the CSV file whose name ends so, as dictionaries."""
        (name,) = [name for name in self.files() if name.endswith(f"-{ending}-simulated.csv")]
        return list(csv.DictReader(io.StringIO(self.files()[name].decode(), newline="")))


def visible(page):
    """All that a reader sees or hears."""
    return page.one("body")["text"]
