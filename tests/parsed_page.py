"""A page of results taken apart, for the tests of what it says."""

from html.parser import HTMLParser


class Page(HTMLParser):
    """The tags of a page with their attributes, and its tables as lists of rows by label."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.tables, self._cell = [], {}, None
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        if tag == "table":
            self._rows = self.tables.setdefault(dict(attrs)["aria-label"], [])
        elif tag == "tr":
            self._rows.append([])
        elif tag in ("td", "th"):
            self._cell = ""

    def handle_data(self, data):
        if self._cell is not None:
            self._cell += data

    def handle_endtag(self, tag):
        if tag in ("td", "th"):
            self._rows[-1].append(self._cell)
            self._cell = None
