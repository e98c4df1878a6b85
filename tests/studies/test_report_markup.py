"""Whatever a person can name is shown in the report as text, never as markup."""

from html.parser import HTMLParser

import pytest

from studies.cli import NOT_MET

ELEMENTS = {  # all that the report is made of; svg's own beside them
    *(
        "html head meta title style body header main section article h1 h2 h3 p a strong dl div dt dd details summary"
    ).split(),
    *("figure figcaption span button table thead tbody tr th td code ul li label input script br").split(),
    *("svg g path use defs text desc clippath rect pattern").split(),
}
WITHOUT_END = {"meta", "input", "br"}


class Page(HTMLParser):
    """Elements, attributes and text of a page."""

    def __init__(self, text):
        super().__init__()
        self.elements, self.text, self.open = [], [], []
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))
        if tag not in WITHOUT_END:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        assert self.open.pop() == tag, f"</{tag}> closes another element"

    def handle_data(self, data):
        if self.open and self.open[-1] not in ("script", "style"):
            self.text.append(data)


@pytest.fixture(scope="module")
def page(hostile_report):
    """The hostile report, read."""
    assert hostile_report.finished.code == NOT_MET, hostile_report.finished.err
    return Page(hostile_report.page.read_text(encoding="utf-8"))


def test_no_element_came_from_a_name(page):
    assert {tag for tag, _ in page.elements} <= ELEMENTS
    assert [tag for tag, _ in page.elements].count("script") == 1
    assert [tag for tag, _ in page.elements].count("title") == 1 + [tag for tag, _ in page.elements].count("svg")
    assert not page.open


def test_no_attribute_acts_or_leads_out(page):
    for tag, attributes in page.elements:
        for name, value in attributes.items():
            assert not name.startswith("on"), (tag, name)
            assert name != "src" and name != "srcset" and name != "action"
            assert name not in ("href", "xlink:href") or value.startswith("#"), (tag, value)
            assert "url(" not in (value or "") or "url(#" in value


def test_the_names_are_shown_as_they_are(page):
    text = " ".join("".join(page.text).split())
    for shown in ("<script>alert(1)</script>", '"><img src=x onerror=alert(2)>', "{{7*7}}", "</title><b>bold</b>"):
        assert shown in text
    assert "{{7+7}} &lt;b&gt; 'onload=alert(3) a'" in text  # the short name, its ampersands its own
    assert "49" not in [attributes.get("title") for _, attributes in page.elements]
    assert "a <img src=x onerror=alert(4)>.toml" in text and "m <img src=x onerror=1>.csv" in text


def test_control_characters_are_shown_not_obeyed(hostile_report):
    text = hostile_report.page.read_text(encoding="utf-8")
    assert "\\x1b[31m" in text and "\\x202e" in text
    assert all(char.isprintable() or char in "\n\t\u202f" for char in text), {
        char for char in text if not char.isprintable()
    }


def test_ids_are_unique_and_every_link_leads_somewhere(page):
    ids = [attributes["id"] for _, attributes in page.elements if "id" in attributes]
    assert len(set(ids)) == len(ids)
    wanted = set()
    for _, attributes in page.elements:
        wanted |= {attributes[name][1:] for name in ("href", "xlink:href") if name in attributes}
        wanted |= set((attributes.get("aria-labelledby") or "").split())
        for value in attributes.values():
            wanted |= {part.split(")")[0].strip("\"'") for part in (value or "").split("url(#")[1:]}
    assert wanted <= set(ids)


def test_every_drawing_has_a_text_alternative(page):
    drawings = [attributes for tag, attributes in page.elements if tag == "svg"]
    assert len(drawings) == 3 + 3 + 2
    assert all(each["role"] == "img" and each["aria-labelledby"].count("figure-") == 2 for each in drawings)
    text = "".join(page.text)
    assert "threshold voltage (mV) against drawn width (µm)" in text and "27 °C" in text and "supply 0.6 V" in text
