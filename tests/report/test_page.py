"""The report page: offline, complete, in the order of a design review."""

import re
from html.parser import HTMLParser

import pytest

from detune.report.alternatives import alternatives
from detune.report.page import page_text
from detune.study.cautions import CAUTIONS

VOID = {"meta", "path", "use", "br", "img", "rect", "circle", "stop", "image"}


class Reader(HTMLParser):
    """Collects text and heads, and checks that every tag is closed."""

    def __init__(self) -> None:
        super().__init__()
        self.open: list[str] = []
        self.texts: list[str] = []
        self.heads: list[str] = []

    def handle_starttag(self, tag, attrs):
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        if tag not in VOID:
            assert self.open.pop() == tag

    def handle_data(self, data):
        if "style" in self.open:
            return
        self.texts.append(data)
        if self.open and self.open[-1] == "h2":
            self.heads.append(data)


def read(html: str) -> Reader:
    reader = Reader()
    reader.feed(html)
    reader.close()
    assert reader.open == []
    return reader


def words(reader: Reader) -> str:
    return " ".join(" ".join(reader.texts).replace("\u00a0", " ").split())


@pytest.fixture(scope="module")
def html(folder):
    return (folder / "report.html").read_text(encoding="utf-8")


def test_page_needs_no_network(html):
    assert (
        "http:" not in html
        and "https:" not in html
        and "//" not in re.sub(r"<pre>.*</pre>", "", html, flags=re.DOTALL)
    )
    assert not re.search(r"<(script|link|iframe|img|image)\b|@import|@font-face", html)
    references = re.findall(r'href="([^"]*)"', html)
    assert references and all(reference.startswith("#") for reference in references)
    ids = re.findall(r'\bid="([^"]*)"', html)
    assert len(ids) == len(set(ids))
    assert {reference[1:] for reference in references} <= set(ids)


def test_page_tells_the_answer_and_every_requirement(html, result):
    reader = read(html)
    text = words(reader)
    assert (
        text.index("Meets the brief: feet: teasel-a. Cost 80, separation 72.4 %, least margin +23.0 %") < 800
    )
    for row in result.answer.margins:
        assert row.quantity in text and row.place in text and row.condition in text
    assert all(caution in text for caution in CAUTIONS)
    assert all(note in text for note in result.problem.assumed)
    assert all(digest in text for _, digest in result.study.hashes)
    assert 'unbalance = "0.02 kg m"' in text


def test_sections_are_in_the_order_of_a_design_review(html):
    heads = read(html).heads
    wanted = [
        "The answer", "Cautions", "What was assumed", "Front", "Margins", "Stations", "Responses", "Modes", "Map",
        "Named designs", "Next cheaper", "Why parts fell out", "Proof record", "How each number", "Inputs in full",
    ]  # fmt: skip
    assert [head[: len(start)] for head, start in zip(heads, wanted, strict=True)] == wanted


def test_page_without_an_answer_says_so_first(nothing_meets):
    text = words(read(page_text(nothing_meets, ())))
    assert text.index("No design meets the brief: none of the 6 designs does.") < 400
    assert "velocity z, peak at table (running): 7.749 mm/s where the limit is at most 2 mm/s" in text
    assert "Meets the brief" not in text


def test_page_of_a_stopped_run_is_marked_partial(variant):
    html = page_text(variant(time_limit=0.0), ())
    assert '<p class="partial">PARTIAL RESULT' in html
    text = words(read(html))
    assert "None found" in text and "this is no proof" in text
    assert "No design meets the brief:" not in text


def test_text_of_the_study_is_escaped(variant):
    html = page_text(variant(("Small press on", "Press <b>& friends</b> on")), ())
    assert "<b>" not in html and "Press &lt;b&gt;&amp; friends&lt;/b&gt; on" in html


def test_alternatives_are_judged_and_reasoned(result):
    beside = alternatives(result)
    found = {item.what: item for item in beside.items}
    # The only cheaper design is four teasel-c at 10 each, which misses the velocity.
    assert beside.cheaper == 1
    cheaper = found["cheaper by 40"].assessment
    assert cheaper.design.parts == ("teasel-c",) and not cheaper.meets
    assert found["next on the front"].assessment.cost == pytest.approx(130.0)
