"""Reading a page back: its elements, attributes and texts."""

from __future__ import annotations

from html.parser import HTMLParser

_EMPTY = {"br", "img", "link", "meta", "source"}


class ReadPage(HTMLParser):
    """Elements as (tag, attributes), texts, and whether every tag is closed in order."""

    def __init__(self, page):
        super().__init__(convert_charrefs=True)
        self.elements, self.texts, self.open, self.faults = [], [], [], []
        self.feed(page)
        self.close()
        self.faults += self.open

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))
        if tag not in _EMPTY:
            self.open.append(tag)

    def handle_endtag(self, tag):
        if not self.open or self.open.pop() != tag:
            self.faults.append(tag)

    def handle_data(self, data):
        self.texts.append((self.open[-1] if self.open else "", data))

    def all(self, tag):
        """Attributes of all elements of a tag."""
        return [attributes for name, attributes in self.elements if name == tag]

    def text(self, tag):
        """Text of the first element of a tag."""
        return next(text for name, text in self.texts if name == tag)

    @property
    def whole_text(self):
        return " ".join(text for tag, text in self.texts if tag != "style")


def assert_harmless(page):
    """No script, no handler, nothing that is fetched: every source is within the page."""
    read = ReadPage(page)
    assert read.faults == []
    tags = {tag for tag, _ in read.elements}
    assert not tags & {"script", "iframe", "object", "embed", "base", "form", "video", "audio"}
    for tag, attributes in read.elements:
        assert not [name for name in attributes if name.startswith("on")], (tag, attributes)
        assert "style" not in attributes
        for name in ("src", "srcset"):
            if name in attributes:
                assert attributes[name].startswith("data:image/"), (tag, attributes[name][:80])
        if "href" in attributes:
            href = attributes["href"]
            assert href == "data:," or (":" not in href and not href.startswith("/")), href
    policy = next(m["content"] for m in read.all("meta") if "http-equiv" in m)
    assert policy.startswith("default-src 'none'; img-src data:; style-src 'sha256-")
    assert "url(" not in read.text("style")
    assert "@import" not in read.text("style")
    return read
