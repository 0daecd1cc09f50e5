"""report.html: all parts are there, it needs nothing but itself, and text of users stays text."""

import re
from html.parser import HTMLParser

import pytest

HEADINGS = [
    "Result in brief", "The job and its inputs", "Fitted distributions", "Rules", "Design situations", "Reliability",
    "Factors", "Change of size", "Sensitivity", "Table of situations", "Doubts", "How it was computed", "Cautions",
]  # fmt: skip
VOID = {"meta", "br", "wbr", "img", "input", "link", "hr"}
NAMESPACES = {
    "http://www.w3.org/2000/svg",
    "http://www.w3.org/1999/xlink",
    "http://www.w3.org/1998/Math/MathML",
}


class Page(HTMLParser):
    """Elements with attributes, the text of each kind of element, and tags that are not closed in order."""

    def __init__(self, text):
        super().__init__(convert_charrefs=True)
        self.elements, self.texts, self.open, self.comments, self.wrong = [], [], [], [], []
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        if not self.open or self.open.pop() != tag:
            self.wrong.append(tag)

    def handle_data(self, data):
        self.texts.append((self.open[-1] if self.open else "", data))

    def handle_comment(self, data):
        self.comments.append(data)

    def words(self, *inside):
        return " ".join("".join(t for tag, t in self.texts if not inside or tag in inside).split())


@pytest.fixture(scope="module")
def page(grid):
    return Page(grid.page)


@pytest.fixture(scope="module")
def bad(hostile):
    return Page(hostile.page)


def test_every_section_has_its_heading_and_is_in_the_contents(page):
    headings = [t.strip() for tag, t in page.texts if tag == "h2" and t.strip()]
    assert [h for h in headings if h in HEADINGS] == HEADINGS
    targets = [a["href"][1:] for tag, a in page.elements if tag == "a" and a["href"].startswith("#")]
    sections = [a["id"] for tag, a in page.elements if tag == "section"]
    assert targets[: len(sections)] == sections
    assert headings[0] == "Contents"
    assert len(sections) == len(headings) - 1


@pytest.mark.parametrize("run", ["page", "bad"])
def test_elements_are_closed_in_order_and_identifiers_are_unique(run, request):
    page = request.getfixturevalue(run)
    assert page.wrong == []
    assert page.open == []
    identifiers = [a["id"] for _, a in page.elements if "id" in a]
    assert len(identifiers) == len(set(identifiers))


@pytest.mark.parametrize("run", ["page", "bad"])
def test_the_page_needs_nothing_but_itself(run, request):
    page = request.getfixturevalue(run)
    known = {a["id"] for _, a in page.elements if "id" in a}
    for tag, attributes in page.elements:
        assert tag not in {"link", "iframe", "object", "embed", "base", "form"}
        for name, value in attributes.items():
            if name in {"src", "href", "xlink:href", "data", "srcset", "action", "poster"}:
                assert re.match(r"#|data:image/png;base64,", value), (tag, name, value)
                assert not value.startswith("#") or value[1:] in known
            elif name.startswith("xmlns"):
                assert value in NAMESPACES
            else:
                assert "//" not in (value or "")
            for target in re.findall(r"url\(([^)]*)\)", value or ""):
                assert target[1:] in known
    code = page.words("style", "script")
    assert "@import" not in code
    assert not re.search(r"url\(|https?:|fetch|XMLHttpRequest|import\(", code)


def test_text_of_users_makes_no_element_and_no_attribute(bad, page):
    forms, harmless = ({(tag, name) for tag, a in p.elements for name in ("", *a)} for p in (bad, page))
    assert forms <= harmless
    assert not {name for _, name in forms if name.startswith("on")}
    assert sum(tag == "script" for tag, _ in bad.elements) == 1


def test_text_of_users_is_shown_as_it_is(bad, texts):
    shown = bad.words("td", "h1", "p", "h3", "dd", "title", "span")
    for text in texts:
        assert " ".join(text.split()) in shown
    assert "49" not in re.findall(r"\d+", bad.words("h1", "title", "dd"))
    assert bad.words("title").startswith("<script>alert(1)</script>")


def test_comments_hold_no_markup(bad):
    assert all("<" not in text and ">" not in text for text in bad.comments)


def test_the_summary_keeps_its_paragraphs(page):
    paragraphs = [t.strip() for tag, t in page.texts if tag == "p"]
    assert "The first paragraph, in two lines." in paragraphs
    assert "The second paragraph." in paragraphs


def test_every_figure_is_in_the_page_and_named(grid, page):
    drawn = {a["aria-label"] for tag, a in page.elements if tag == "svg"}
    assert {f"figures/{name}.svg" for name in drawn} == {n for n in grid.files if n.endswith(".svg")}
    captions = [a["id"] for tag, a in page.elements if tag == "figure"]
    assert captions == [f"figure-{i}" for i in range(1, len(drawn) + 1)]
    for i in range(1, len(drawn) + 1):
        assert f"Figure {i}." in page.words("b")


def test_what_has_no_beta_is_told(grid, page):
    words = page.words()
    assert "1 situation without β" in words
    assert "Situations without β, and why" in words
    assert "no failure region within reach" in words
    assert "nan" not in words.lower().split()


def test_cautions_say_what_the_numbers_are_not(page):
    words = page.words("p")
    for text in (
        "Local codes and licensed practice prevail.",
        "Target reliabilities and factors are for competent engineers and the responsible authority to set.",
        "Statistical uncertainty of fitted parameters is not included in β.",
    ):
        assert text in words


def test_digests_are_short_with_the_whole_in_reach(grid, page):
    sample = grid.result.study.records["strength"]
    titles = {a["title"] for tag, a in page.elements if tag == "span" and "title" in a}
    assert sample.sha256 in titles
    assert sample.sha256 not in page.words()
    assert sample.sha256[:12] + "…" in page.words()


def test_sources_of_variables_are_told(page):
    assert "own records, n = 12" in page.words("td").replace("\u00a0", " ")
    assert "words; judgement" in page.words("td")
