"""Pages taken apart for tests, and names from files that mean harm."""

import re
from html.parser import HTMLParser

HOSTILE = (
    "<script>alert(1)</script>",
    '"><img src=x onerror=alert(1)>',
    "{{ 7 * 7 }}",
    "$\\frac{1}{0}$ & co",
    "x" * 400,
    "a\x1b[31m\u202eb",
    "</style></svg></main>",
)
VOID = {"meta", "img", "br", "hr", "link", "input"}


class Page(HTMLParser):
    """Checks that elements nest, and collects tags, ids, references and text."""

    def __init__(self, text):
        super().__init__()
        self.open, self.tags, self.ids, self.references, self.words = [], [], [], set(), []
        self.attributes = []
        self.feed(text)
        self.close()
        assert not self.open

    def handle_starttag(self, tag, attrs):
        self.handle_startendtag(tag, attrs)
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags.append(tag)
        for name, value in attrs:
            self.attributes.append((name, value or ""))
            if name == "id":
                self.ids.append(value)
            self.references.update(re.findall(r"url\(#([^)]*)\)", value or ""))
            if name == "href":
                assert value.startswith("#")
                self.references.add(value[1:])

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        if not self.open or self.open[-1] != "style":
            self.words.append(data)

    @property
    def text(self):
        return " ".join(" ".join(self.words).split())
