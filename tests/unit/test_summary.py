"""The page that is read first: every branch of its verdict, its numbers, and how it is written."""

import math
import re
from html.parser import HTMLParser
from pathlib import Path

import pytest

from fogline.plan import closing_words, hold_outs_hash
from fogline.rounding import rounded
from fogline.summary import Summary, read_summary
from fogline.summary_page import html_page, markdown_page, write_pages
from fogline.summary_verdict import BAD, GOOD, MIND
from small_results import SmallResults

INF = math.inf


@pytest.fixture
def summary_of(tmp_path: Path):
    """Return a function from changed results to their summary."""

    def read(**changes) -> Summary:
        return read_summary(SmallResults(**changes).write(tmp_path / "toy"))

    return read


@pytest.mark.parametrize(
    ("band", "text"),
    [
        ((57.7706, 55.8402, 59.8526), "57.8 (+2.1 −1.9)"),
        ((0.0826, 0.0779, 0.0873), "0.0826 ± 0.0047"),
        ((200.2, 181.7, 222.7), "200 (+22 −18)"),
        ((1.4327591e8, 1.266e8, 1.617e8), "1.43 (+0.18 −0.17) × 10⁸"),
        ((1.05e-3, 9.5e-4, 1.15e-3), "(1.05 ± 0.10) × 10⁻³"),
        ((12346.0, 12000.0, 12800.0), "12350 (+450 −350)"),
        # The error rounds up to three digits: one decimal fewer, for value and both errors.
        ((5.0, 4.9004, 5.31), "5.00 (+0.31 −0.10)"),
        ((-9.798, -9.901, -9.684), "−9.80 (+0.11 −0.10)"),
        ((1.0, 1.0, 1.25), "1.00 (+0.25 −0.00)"),
        ((2.0, 2.0, 2.0), "2"),
        ((523.4, 420.4, INF), "520 (−100, upper end beyond reach)"),
        ((523.4, 523.4, INF), "523 (upper end beyond reach)"),
        ((INF, 520.0, INF), "beyond reach (84% of draws above 520)"),
        ((INF, INF, INF), "beyond reach"),
    ],
)
def test_two_digits_of_the_smaller_error(band, text) -> None:
    assert rounded(*band).text == text


def test_nan_is_a_fault() -> None:
    with pytest.raises(ValueError, match="must not hold NaN"):
        rounded(1.0, math.nan, 2.0)


def test_all_well(summary_of) -> None:
    summary = summary_of()
    converged, consistent, prior, numbers, after = summary.verdict
    assert [line.state for line in summary.verdict[:3]] == [GOOD, GOOD, GOOD]
    assert (converged.answer, consistent.answer, prior.answer) == ("Yes", "Yes", "No")
    assert "largest R-hat 1.0021, fewest effective samples 4100" in converged.text
    assert "No flag among 3 rows and 2 tests" in consistent.text
    assert "with a chance of 5%" in consistent.text
    assert "worst is `paths`: p = 0.09 (1.7σ)" in consistent.text
    # What a data set's own calibration rests on is no finding.
    assert "scale[counts]" not in prior.text
    assert "Data fix 2.2 of 3 parameters, the prior 0.8" in prior.text
    assert "unit-depth mean free path = 57.8 (+2.1 −1.9) proper Mpc" in numbers.text
    assert after.answer == "Compare analyses"


def test_not_converged(summary_of) -> None:
    why = "R-hat is not below 1.01 in 2 of 2 parameters, worst log_f[15.0]: 1.3"
    summary = summary_of(converged=False, reasons=[why, "ensemble 1: 3 of 64 walkers stuck"])
    line = summary.verdict[0]
    assert (line.answer, line.state) == ("No", BAD)
    assert f"{why}. (1 more in `convergence.json`)" in line.text
    assert summary.verdict[3].answer == "Nothing yet"
    (step,) = summary.steps
    for key in ("max_steps` (now 20000)", "warm_up` (now [600, 300])", "components"):
        assert f"`sampler.{key}" in step.text


def test_remark_on_convergence_is_told(summary_of) -> None:
    line = summary_of(notes=["one ensemble only"]).verdict[0]
    assert line.answer == "Yes"
    assert line.state == MIND
    assert "One ensemble only." in line.text


def test_flagged_row_and_test(summary_of) -> None:
    summary = summary_of(row_flags=("", "outside", ""), test_flags=("misfit", ""))
    line = summary.verdict[1]
    assert (line.answer, line.state) == ("No", BAD)
    assert "2 flags among 3 rows and 2 tests, in `counts`;" in line.text
    assert summary.datasets[0].flags == ("row 1 outside", "trend (4.2σ)")
    assert summary.datasets[1].flags == ()
    assert summary.steps[0].text.startswith("`figures/misfit`")
    assert "`evolution.breaks`" in summary.steps[0].text


def test_scatter_of_a_data_set_and_weak_weights(summary_of) -> None:
    flags = {"counts": "scatter too large", "paths": ""}
    summary = summary_of(dataset_flags=flags, pareto_k=(0.1, 0.7, 0.9))
    line = summary.verdict[1]
    assert (line.answer, line.state) == ("As far as tested", MIND)
    assert "The scatter of `counts` is too large as a whole." in line.text
    assert "2 rows are judged by weights that can't be trusted" in line.text
    assert summary.datasets[0].flags == ("scatter too large",)


def test_tension_is_inconsistent_and_names_what_to_exclude(summary_of) -> None:
    summary = summary_of(
        tension=[("counts", "counts", 0.3, 1.0, ""), ("both", "paths counts", 1e-4, 3.9, "tension")]
    )
    line = summary.verdict[1]
    assert (line.answer, line.state) == ("No", BAD)
    assert "Of 2 hold-outs 1 flagged; worst is `both`: p = 0.0001 (3.9σ)" in line.text
    assert "exclude: [data/counts.ecsv, data/paths.ecsv]" in summary.steps[0].text
    assert summary.datasets[1].flags == ("at odds with all others (3.9σ)",)


def test_without_hold_outs_their_command_is_given(summary_of) -> None:
    summary = summary_of(tension=None)
    line = summary.verdict[1]
    assert (line.answer, line.state) == ("As far as tested", MIND)
    assert "Hold-outs were not run; `snakemake --cores all hold_outs`" in line.text
    assert summary.verdict[4].answer == "Run the hold-outs"


def test_hold_outs_of_another_fit_are_stale(summary_of) -> None:
    summary = summary_of(tension_fingerprint="beef")
    assert "They are of an earlier fit" in summary.verdict[1].text
    assert summary.verdict[1].state == MIND


def test_prior_driven_quantities_and_ranges(summary_of) -> None:
    summary = summary_of(
        information=[
            ("log_f[12.0]", 2.5, 0.58, 0.1),
            ("log_f[12]", 2.5, 0.58, 0.1),
            ("rho_hi", 3.5, 0.2, -0.41),
            ("mean_free_path_unit_depth", 2.5, 0.2, math.nan),
        ],
        share_by_column=(0.9, 0.8, 0.2, 0.1, 0.6),
    )
    line = summary.verdict[2]
    assert (line.answer, line.state) == ("In part", MIND)
    assert line.text.count("log_f[12]") == 1
    assert "`log_f[12]` at z = 2.5 (58% of its squared error is the prior's)" in line.text
    assert "`rho_hi` at z = 3.5 (moves 0.4σ when the prior's power doubles)" in line.text
    assert "at log N = 12.0 to 12.1, 12.4." in line.text
    assert "unit_depth" not in line.text
    marked = {(n.symbol, n.z) for n in summary.numbers if "prior-driven" in n.remarks}
    assert marked == {("ρ_HI", 3.5), ("Ω_HI", 3.5)}
    assert "`model.prior.slope.step.scale: 1` (now 0.5)" in summary.steps[0].text


def test_beyond_reach_and_extrapolated_numbers(summary_of) -> None:
    summary = summary_of(
        unit_depth=((INF, INF, INF), (INF, 520.0, INF), (57.77, 55.84, 59.85), (23.3, 22.0, 24.7)),
        z_data=(2.6, 3.0, 3.9),
    )
    found = {n.z: n for n in summary.numbers if n.symbol == "unit-depth mean free path"}
    assert found[2.5].text == "beyond reach (84% of draws above 520 proper Mpc)"
    assert [z for z, n in found.items() if n.remarks] == [2.5, 4.5]
    cautions = " ".join(summary.cautions)
    assert "quote a lower limit" in cautions
    assert "Data lie between z = 2.6 and 3.9" in cautions
    assert "at 3 of the 4 redshifts" in cautions
    assert "Ω_HI times 1.3" in cautions


class Page(HTMLParser):
    """What a page holds: balance of its tags, text, and attributes that load something."""

    VOID = ("meta", "img", "br", "link", "hr")

    def __init__(self, text: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.faults: list[str] = []
        self.tags: list[tuple[str, dict[str, str]]] = []
        self.text = ""
        self.feed(text)
        self.close()

    def handle_starttag(self, tag, attrs) -> None:
        self.tags.append((tag, dict(attrs)))
        if tag not in self.VOID:
            self.open.append(tag)

    def handle_endtag(self, tag) -> None:
        if not self.open or self.open.pop() != tag:
            self.faults.append(tag)

    def handle_data(self, data) -> None:
        self.text += data


def test_html_is_well_formed_and_holds_everything(summary_of, tmp_path: Path) -> None:
    # Text that would break a page that did not escape it.
    summary = summary_of(converged=False, reasons=["a < b & `c` > <script>d</script>"])
    text = html_page(summary, tmp_path / "toy")
    page = Page(text)
    assert page.open == page.faults == []
    assert "a < b & c > <script>d</script>" in page.text.replace("A <", "a <")
    tags = [tag for tag, _ in page.tags]
    assert not {"script", "link", "iframe"} & set(tags)
    loaded = [a.get("src") or a.get("href") or "" for _, a in page.tags if {"src", "href"} & set(a)]
    assert len(loaded) == len(summary.figures) == 10
    assert all(source.startswith("data:image/png;base64,") for source in loaded)
    assert not re.search(r"https?://|@import|url\(", text)
    assert all(a["alt"] for tag, a in page.tags if tag == "img")
    assert ("html", {"lang": "en"}) in page.tags
    assert all(line.question in page.text for line in summary.verdict)
    assert all(f"{number.rounded.value}" in page.text for number in summary.numbers)


def test_markdown_links_exist_and_say_the_same(summary_of, tmp_path: Path) -> None:
    summary = summary_of(row_flags=("outside", "", ""))
    folder = tmp_path / "toy"
    write_pages(summary, folder, folder / "summary.html", folder / "summary.md")
    text = (folder / "summary.md").read_text(encoding="utf-8")
    assert text == markdown_page(summary)
    links = re.findall(r"!\[[^\]]+\]\(([^)]+)\)", text)
    assert len(links) == 10
    assert all((folder / link).is_file() for link in links)
    assert all(n.text in text for n in summary.numbers)
    for table in re.findall(r"(?:^\|.*\n)+", text, flags=re.MULTILINE):
        bars = [line.replace("\\|", "").count("|") for line in table.splitlines()]
        assert len(bars) > 3
        assert len(set(bars)) == 1
    page = Page((folder / "summary.html").read_text(encoding="utf-8")).text
    for line in summary.verdict:
        assert line.text.replace("`", "") in page


def test_only_figures_that_exist_are_shown(tmp_path: Path) -> None:
    folder = SmallResults().write(tmp_path / "toy")
    (folder / "figures" / "tension.png").unlink()
    names = [figure.name for figure in read_summary(folder).figures]
    assert "tension" not in names
    assert len(names) == 9


def test_last_words_point_to_the_page(tmp_path: Path) -> None:
    folder = SmallResults(converged=False, reasons=["too short"]).write(tmp_path / "toy")
    assert closing_words(["toy"], tmp_path) == f"toy: NOT CONVERGED; see {folder}/\n  too short"
    (folder / "summary.html").write_text("page")
    assert f"see {folder / 'summary.html'}\n" in closing_words(["toy"], tmp_path)


def test_hash_of_hold_outs_follows_their_content(tmp_path: Path) -> None:
    folder = SmallResults().write(tmp_path / "toy")
    before = hold_outs_hash("toy", tmp_path)
    assert before == hold_outs_hash("toy", tmp_path)
    path = folder / "tables" / "tension.ecsv"
    path.write_text(path.read_text().replace("1.7", "1.8"))
    assert hold_outs_hash("toy", tmp_path) not in ("", before)
    assert hold_outs_hash("other", tmp_path) == ""
