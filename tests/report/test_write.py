"""The written report: complete, in order, escaped, the same bytes again, and clear about what is wrong."""

from __future__ import annotations

import re
from dataclasses import replace
from html.parser import HTMLParser
from pathlib import Path

import compared_folder
import pytest

from rcbench.errors import InputError
from rcbench.report.rule import DISCLAIMER, LIMITS
from rcbench.report.source import read_source
from rcbench.report.write import bottom_line_text, write_report, write_source
from rcbench.signatures.registry import SIGNATURES

SECTIONS = (
    "1 Bottom line",
    "2 What was tested, with what data",
    "3 Spread against kept, by depth",
    "4 Comparison",
    "5 Experiments",
    "6 Data audit",
    "7 Uncertainty budget",
    "8 Device as stated",
    "9 Deviations and exclusions",
    "10 Signatures used",
)


class Page(HTMLParser):
    """Tags, headings and visible text of a page; fails on tags that do not match."""

    VOID = frozenset({"meta", "br", "img", "link", "hr"})

    def __init__(self, text: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.tags: list[tuple[str, dict[str, str | None]]] = []
        self.headings: list[str] = []
        self.words: list[str] = []
        self.feed(text)
        assert self.open == []

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        if tag not in self.VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        if self.open and self.open[-1] == "h2":
            self.headings.append(data)
        if not {"style", "svg"} & set(self.open):
            self.words.append(data)

    @property
    def text(self) -> str:
        return " ".join(" ".join(self.words).split())


@pytest.fixture(scope="module")
def folder(tmp_path_factory) -> Path:
    folder = tmp_path_factory.mktemp("compared")
    return write_source(compared_folder.source(), folder).parent


@pytest.fixture(scope="module")
def page(folder) -> Page:
    return Page((folder / "report.html").read_text(encoding="utf-8"))


def test_sections_come_in_the_order_of_the_users_questions(page):
    assert tuple(page.headings) == SECTIONS


def test_the_first_lines_say_what_agreement_means_and_the_end_what_is_not_shown(page, folder):
    assert page.text.index(DISCLAIMER) < page.text.index("Rows of the comparison")
    for limit in LIMITS:
        assert limit in page.text
    assert "acceptance procedure" in page.text
    markdown = (folder / "report.md").read_text(encoding="utf-8")
    assert DISCLAIMER in markdown
    for heading in SECTIONS:
        assert f"## {heading}\n" in markdown


def test_the_page_stands_alone(page, folder):
    """No scripts, no links to other files or hosts: it opens offline and can be attached to a mail."""
    tags = {tag for tag, _ in page.tags}
    assert not tags & {"script", "link", "img", "iframe", "object"}
    for tag, attributes in page.tags:
        for name, value in attributes.items():
            assert not name.startswith("on"), (tag, name)
            if name in ("href", "src", "xlink:href"):
                assert value is not None
                assert value.startswith(("#", "data:image/png;base64,")), (tag, value)
    style = re.search(r"<style>(.*?)</style>", (folder / "report.html").read_text(encoding="utf-8"), re.DOTALL)
    assert style is not None
    assert "url(" not in style.group(1)
    assert "@import" not in style.group(1)


def test_what_comes_from_files_is_escaped_everywhere(page, folder):
    hostile = compared_folder.HOSTILE
    html = (folder / "report.html").read_text(encoding="utf-8")
    assert hostile in page.text
    assert "<script" not in html
    assert "<script" not in (folder / "report.md").read_text(encoding="utf-8")
    tex = (folder / "tables" / "comparison.tex").read_text(encoding="utf-8")
    assert r"\textless{}script\textgreater{}" in tex
    assert r"\& 50 \% of \#1 \{a\_b\} \textbar{} \textasciitilde{}\textasciicircum{}\textbackslash{}" in tex


def test_latex_tables_have_one_ampersand_less_than_columns(folder):
    for path in sorted((folder / "tables").glob("*.tex")):
        text = path.read_text(encoding="utf-8")
        assert text.isascii(), path.name  # any engine reads it
        columns = re.search(r"\\begin\{longtable\}\{([lr]+)\}", text)
        assert columns is not None
        for row in re.findall(r"\\midrule\n\\endhead\n(.*?)\\bottomrule", text, re.DOTALL)[0].splitlines():
            if not row.startswith(("\\addlinespace", "\\multicolumn")):
                assert len(re.findall(r"(?<!\\)&", row)) == len(columns.group(1)) - 1, row
        assert "\\toprule" in text


def test_markdown_tables_have_the_same_number_of_cells_in_each_row(folder):
    width = 0
    for line in (folder / "report.md").read_text(encoding="utf-8").splitlines():
        if not line.startswith("|"):
            width = 0
            continue
        cells = len(re.findall(r"(?<!\\)\|", line))
        assert width in (0, cells), line
        width = cells


def test_no_number_is_printed_as_nan_or_infinite(page, folder):
    for text in (page.text, *(p.read_text(encoding="utf-8") for p in (folder / "tables").iterdir())):
        assert not re.search(r"(?<![A-Za-z])(nan|inf|None|NaN|NaT)(?![A-Za-z])", text)
    assert "–" in page.text  # what is missing


def test_no_name_of_an_element_is_used_twice_and_all_references_resolve(page):
    names = [attributes["id"] for _, attributes in page.tags if "id" in attributes]
    assert len(names) == len(set(names))
    for _, attributes in page.tags:
        target = attributes.get("href") or attributes.get("xlink:href") or "data:"
        assert target.startswith("data:") or target[1:] in names


def test_findings_are_marked_by_sign_and_word(page):
    for sign in ("≈ agrees", "≠ departs, worse", "? undecided", "· not tested"):
        assert sign in page.text


def test_every_signature_used_has_a_card(page):
    for key in ("xeb_fidelity", "self_fidelity", "otoc", "reference_echo", "layer_loss"):
        card = SIGNATURES[key]
        for words in (card.title, card.formula, card.source, card.blind):
            assert " ".join(words.split()) in page.text


def test_invented_devices_are_labelled(page, folder):
    assert "Invented device, invented data" in page.text
    assert "Invented device, invented data" in (folder / "summary.html").read_text(encoding="utf-8")


def test_data_that_were_not_stated_are_said_to_be(page):
    assert "Decoupling not stated" in page.text
    assert "3.50 h, 2031-04-02T08:10:00Z to 2031-04-02T11:40:00Z" in page.text
    assert "Fixed before the data" in page.text


def test_figures_are_written_twice_with_no_date_in_them(folder):
    names = {path.stem for path in (folder / "figures").glob("*.svg")}
    assert names == {path.stem for path in (folder / "figures").glob("*.png")}
    assert {"path", "sampling-xeb_fidelity", "mirror-polarization", "butterfly-otoc-map"} <= names
    for path in (folder / "figures").iterdir():
        data = path.read_bytes()
        assert b"Matplotlib v" not in data
        assert not re.search(rb"<dc:date>|tIME|20[0-9]{2}-[0-9]{2}-[0-9]{2}T", data)


def test_figures_are_described_in_words(page):
    labels = [attributes["aria-label"] for tag, attributes in page.tags if tag == "figure"]
    assert len(labels) > 15
    assert all("depth 2" in label for label in labels if label)


def test_the_same_data_give_the_same_bytes(folder, tmp_path):
    source = compared_folder.source()
    few = tuple(e for e in source.campaign.experiments if e.name in ("sampling", "butterfly"))
    frame = source.comparison
    frame = frame[frame["experiment"].isin(["sampling", "butterfly"])]
    frame = frame[frame["signature"].isin(["self_fidelity", "otoc", "reference_echo"])]
    source = replace(source, campaign=replace(source.campaign, experiments=few), comparison=frame)
    first, second = (write_source(source, tmp_path / name).parent for name in ("first", "second"))
    written = sorted(path.relative_to(first) for path in first.rglob("*") if path.is_file())
    assert len(written) > 15
    for name in written:
        assert (first / name).read_bytes() == (second / name).read_bytes(), name


def test_a_whole_folder_is_read_and_written(tmp_path):
    folder = compared_folder.write_folder(tmp_path / "folder")
    source = read_source(folder)
    expected = compared_folder.source()
    assert source.comparison["measured"].sum() == pytest.approx(expected.comparison["measured"].sum())
    assert bottom_line_text(folder).startswith("Spread complete by depth 10")
    assert bottom_line_text(folder).endswith(DISCLAIMER)


@pytest.mark.parametrize("name", ["comparison.csv", "estimates.csv", "predictions.csv", "roster.csv"])
def test_a_missing_table_is_named(tmp_path, name):
    folder = compared_folder.write_folder(tmp_path / "folder")
    (folder / name).unlink()
    with pytest.raises(InputError, match=name.replace(".", r"\.")):
        write_report(folder)
    assert not (folder / "report.html").exists()


def test_a_column_edited_by_hand_is_named(tmp_path):
    folder = compared_folder.write_folder(tmp_path / "folder")
    path = folder / "comparison.csv"
    path.write_text(path.read_text().replace("measured", "meassured", 1))
    with pytest.raises(InputError, match="measured"):
        write_report(folder)


def test_a_word_where_a_number_should_be_is_named(tmp_path):
    folder = compared_folder.write_folder(tmp_path / "folder")
    path = folder / "comparison.csv"
    lines = path.read_text().splitlines()
    cells = lines[1].split(",")
    cells[lines[0].split(",").index("margin")] = "wide"
    path.write_text("\n".join([lines[0], ",".join(cells), *lines[2:]]) + "\n")
    with pytest.raises(InputError, match=r"comparison\.csv: margin: found 'wide'"):
        write_report(folder)


def test_a_broken_audit_is_named(tmp_path):
    folder = compared_folder.write_folder(tmp_path / "folder")
    (folder / "audit.json").write_text("{")
    with pytest.raises(InputError, match="audit"):
        write_report(folder)


def test_a_campaign_with_echoes_only_still_makes_a_report(tmp_path):
    source = compared_folder.source()
    few = tuple(e for e in source.campaign.experiments if e.name == "echo")
    frame = source.comparison[source.comparison["experiment"] == "echo"]
    bare = replace(
        source,
        campaign=replace(source.campaign, experiments=few, device=replace(source.campaign.device, errors=None)),
        comparison=frame.assign(noise_model=float("nan"), finding="undecided", note="no noise model"),
        predictions=source.predictions[source.predictions["model"] == "ideal"],
        audit={},
        provenance={},
    )
    page = Page(write_source(bare, tmp_path).read_text(encoding="utf-8"))
    assert "never supports kept alone" in page.text
    assert "there is no path to draw" in page.text
    assert "not stated" in page.text
