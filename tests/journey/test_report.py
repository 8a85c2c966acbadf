"""The report of a run, from an invented result (see invented_run.py): every figure shown is the result's."""

import copy
import re
import struct
import subprocess
import sys
from html.parser import HTMLParser

import pytest
from invented_run import LEDGER, log, rays, result, section

from inverse import report

LENS = section()
RAYS = rays(LENS)
LOG = log()
FULL = result()
VOID = {"meta", "path", "rect", "use", "image", "br"}


class Page(HTMLParser):
    """The page read back: text by data-key, headings, all visible text, tags left open."""

    def __init__(self, html):
        super().__init__()
        self.html, self.keys, self.headings, self.open, self.wrong, self.words = html, {}, [], [], [], []
        self.feed(html)
        self.close()
        self.text = re.sub(r"\s+", " ", "".join(self.words).replace("\u202f", "").replace("\u00a0", " "))

    def handle_starttag(self, tag, attributes):
        if tag not in VOID:
            self.open.append((tag, dict(attributes)))
        if tag == "h2":
            self.headings.append("")

    def handle_endtag(self, tag):
        if tag in VOID:
            return
        if not self.open or self.open[-1][0] != tag:
            self.wrong.append(tag)
        self.open.pop()

    def handle_data(self, data):
        if self.open and self.open[-1][0] == "style":
            return
        self.words.append(data)
        for tag, attributes in self.open:
            if "data-key" in attributes:
                key = attributes["data-key"]
                self.keys[key] = self.keys.get(key, "") + data
            if tag == "h2":
                self.headings[-1] += data


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    """The folder of the complete report, written once."""
    path = tmp_path_factory.mktemp("report")
    report.write(path, FULL, LOG, LENS, RAYS)
    return path


@pytest.fixture(scope="module")
def full(folder):
    """The complete page read back."""
    return Page((folder / "report.html").read_text(encoding="utf-8"))


@pytest.fixture
def page(tmp_path, monkeypatch):
    """Writes a report with coarse pictures and reads the page back; arguments replace parts of the run."""
    monkeypatch.setattr("inverse.report.canvas.PNG_DPI", 30)  # the page does not depend on it

    def read(found=FULL, rows=LOG, lens=LENS, paths=RAYS):
        report.write(tmp_path, found, rows, lens, paths)
        return Page((tmp_path / "report.html").read_text(encoding="utf-8"))

    return read


@pytest.fixture
def words(page, monkeypatch):
    """The page without its drawings, for tests of words alone."""
    monkeypatch.setattr("inverse.report.page.pictures", lambda *_: {})
    return page


def changed(**parts):
    """The full result with parts replaced; a part given as None is taken out."""
    found = copy.deepcopy(FULL)
    for key, part in parts.items():
        if part is None:
            del found[key]
        else:
            found[key] = {**found[key], **part} if isinstance(found.get(key), dict) else part
    return found


def number(text):
    """(value, half a unit of its last digit, the figure after ±) of a figure as shown."""
    plain = text.replace("\u202f", "").replace("\u2212", "-").replace("\u00a0", " ")
    first, *error = re.findall(r"-?\d+(?:\.\d+)?", plain.split("(")[0])
    decimals = len(first.partition(".")[2])
    trailing = len(first) - len(first.rstrip("0")) if "." not in first else 0
    return float(first), 0.5 * 10.0 ** (trailing - decimals), float(error[0]) if "±" in plain else None


def expected(found):
    """{dotted key: value as the page's unit has it} of every plain figure the page must show."""
    fractions = ("share", "efficiency", "ceiling", "ceiling_with_losses", "transmission")
    wanted = {}
    for part in ("limit", "photometry", "part", "ledger", "paths"):
        for key, value in found[part].items():
            if not isinstance(value, (str, list)) and not re.search("_se(_|$)", key) and value != 0.0:
                whole = part in ("ledger", "paths") or key.endswith(fractions)
                wanted[f"{part}.{key}"] = value * (100 if whole else 1)
    for key in ("share", "share_of_best", "designed_paths_share"):
        wanted[f"got.{key}"] = 100 * found["got"][key]
    for constraint in found["constraints"]:
        wanted[f"constraints.{constraint['name']}"] = constraint["measured"]
    wanted["agreement.difference"] = 100 * found["agreement"]["difference"]
    return wanted


def test_every_figure_shown_is_the_results(words):
    """Limit, share, ledger, paths, constraints, photometry and part agree to half their last digit."""
    shown = words().keys
    for key, value in expected(FULL).items():
        found, half, _ = number(shown[key])
        ties = 1 + 1e-9  # round either way
        assert abs(found - value) <= half * ties, f"{key}: {shown[key]} for {value}"


def test_every_figure_keeps_two_digits_at_least(words):
    """No figure is rounded away: what is not zero is shown within 5 %, or within its own error."""
    shown = words().keys
    for key, value in expected(FULL).items():
        found, _, error = number(shown[key])
        assert abs(found - value) <= max(0.05 * abs(value), error or 0.0), f"{key}: {shown[key]} for {value}"


def test_errors_shown_are_the_results(words):
    """The figure after ± is the standard error, rounded to one or two digits."""
    shown = words().keys
    errors = {f"ledger.{k}": 100 * v for k, v in FULL["ledger_se"].items() if v}
    errors |= {"photometry.flux_lm": 0.2, "photometry.ring_contrast": 0.007}
    errors |= {"got.share": 100 * FULL["got"]["share_se"]}
    errors |= {"agreement.difference": 100 * FULL["agreement"]["sigma"]}
    for key, error in errors.items():
        assert number(shown[key])[2] == pytest.approx(error, rel=0.25), key  # 2.5 in one digit is 2 or 3


def test_the_headline_says_asked_allowed_got_and_judged(words):
    """One paragraph holds the wish, the limit, the share with its error and the verdict."""
    text = words().text
    for phrase in (
        "at least 80 % of the LED's light within ±5.74° of the axis, from a clear aperture of 20 mm",
        "Physics allows all of it but what uncoated surfaces reflect, which leaves 92.3 %",
        "This lens delivers 81.32 ± 0.04 %, which is 88.1 % of that",
        "The beam is as asked and every constraint is met",
    ):
        assert phrase in text


def test_chapters_come_in_reading_order(full):
    """Lens, beam, encircled flux, spot, search, ledger, constraints, photometry, part, limit, cautions."""
    assert full.headings == [
        "The lens", "The beam", "Encircled flux", "The spot on the wall", "The search",
        "Where the light goes", "Constraints", "Photometry", "The part", "What physics allows",
        "Before you use it", "Where these figures come from", "Files beside this page",
    ]  # fmt: skip


def test_the_page_stands_alone(full):
    """Nothing is loaded: no address, no script, no source, no style sheet; links stay on the page."""
    html = full.html
    bare = re.sub(r'"data:image/png;base64,[^"]*"', '""', html)
    for forbidden in ("http", "src=", "<script", "<link", "@import", "//", "onload", "javascript:"):
        assert forbidden not in bare, forbidden
    assert all(target.startswith("#") for target in re.findall(r'href="([^"]+)"', bare))


def test_ids_are_unique_and_references_resolve(full):
    """Five drawings on one page do not get in each other's way."""
    html = full.html
    ids = re.findall(r'\bid="([^"]*)"', html)
    used = {a or b for a, b in re.findall(r'href="#([^"]*)"|url\(#([^)]*)\)', html)}
    assert len(ids) == len(set(ids))
    assert used <= set(ids)


def test_tags_are_closed_in_order(full):
    """The page is well formed, drawings included."""
    assert full.wrong == [] and full.open == []


def test_the_files_named_are_the_files_written(tmp_path):
    """The list returned is what lies in the folder, and nothing else does."""
    written = report.write(tmp_path, FULL, LOG, LENS, RAYS)
    assert sorted(written) == sorted(p.name for p in tmp_path.iterdir())
    drawn = {"section.png", "beam.png", "encircled.png", "spot.png", "convergence.png"}
    assert set(written) == {"report.html", *drawn}


def test_pictures_are_wide_enough_for_print(folder):
    """Every PNG is 1600 pixels wide, read from its header (PNG specification, IHDR)."""
    pictures = sorted(folder.glob("*.png"))
    assert len(pictures) == 5
    for picture in pictures:
        head = picture.read_bytes()[:24]
        assert head[:8] == b"\x89PNG\r\n\x1a\n"
        assert struct.unpack(">II", head[16:24])[0] == 1600


def test_the_same_run_gives_the_same_bytes(folder, tmp_path):
    """Two reports of one result are equal, page and pictures."""
    for name in report.write(tmp_path, copy.deepcopy(FULL), LOG, LENS, RAYS):
        assert (tmp_path / name).read_bytes() == (folder / name).read_bytes(), name


def test_text_from_outside_is_escaped(page):
    """Markup in a name, a family, a place, a path, a stage or a file name is shown, never obeyed."""
    evil = "<script>alert('&')</script>"
    found = changed(name=evil, search=[{"family": evil, "start_score": 0.1, "end_score": 0.2, "kept": True}])
    found["constraints"][0].update(name=evil, where=evil)
    found["paths"] = {evil: 0.5}
    found["verdict"]["missing"] = [evil]
    found["stopped"] = {"reason": evil, "advice": f"run `{evil}` now"}
    found["part"]["material"] = found["stamp"]["version"] = evil
    found["files"] = [evil]
    rows = [{**row, "stage": evil} for row in LOG]
    read = page(found, rows)
    assert "<script" not in read.html
    assert read.text.count("alert('&')") >= 9
    assert read.wrong == []


@pytest.mark.parametrize("key", sorted(FULL))
def test_any_part_may_be_missing(key, words):
    """Without one part of the result the page is written, and no empty value shows through."""
    read = words(changed(**{key: None}))
    assert not re.search(r"\b(None|nan|inf|Undefined|\{\})\b", read.text)
    assert read.wrong == []


@pytest.mark.parametrize("key", ["asked", "photometry", "limit", "got", "constraints", "emitter"])
def test_drawings_do_without_a_part(key, page):
    """Parts that drawings only annotate may be missing while the drawings are made."""
    read = page(changed(**{key: None}))
    assert "The spot on the wall" in read.headings and "The search" in read.headings
    assert not re.search(r"\b(None|nan|inf)\b", read.text)


def test_a_bare_result_still_gives_cautions(page):
    """With no lens, no log and no figures the page says so and keeps its warnings."""
    read = page({}, [], None, {})
    assert "No verdict was recorded." in read.text
    assert "Before you use it" in read.headings


@pytest.mark.parametrize("key", ["section", "beam", "encircled", "spot", "convergence"])
def test_a_picture_without_data_is_left_out(key, tmp_path):
    """No data, no picture, no chapter about it."""
    found = changed(**({} if key in ("section", "convergence") else {key: None}))
    rows, lens = [] if key == "convergence" else LOG, None if key == "section" else LENS
    written = report.write(tmp_path, found, rows, lens, RAYS)
    assert f"{key}.png" not in written and len(written) == 5


def test_a_violated_constraint_stands_out(words):
    """Its row says missed, the verdict table counts it, and the reasons name it."""
    missing = ["the least wall is 0.72 mm, not 0.80 mm"]
    found = changed(verdict={"exit_code": 4, "word": "missed", "missing": missing})
    found["constraints"][2].update(measured=0.72, slack=-0.08, met=False)
    text = words(found).text
    assert re.search(r"least wall\s*0\.720 mm\s*≥ 0\.800 mm\s*−0\.080 mm\s*✗ missed", text)
    assert re.search(r"3 of 4\s*all\s*✗ missed", text)
    assert "The least wall is 0.72 mm, not 0.80 mm." in text
    assert "Not met: least wall." in text


def test_a_quantity_without_a_bound_has_no_verdict(words):
    """A constraint nobody bounded is measured, and neither met nor missed."""
    found = changed()
    place = "top at r = 0.00 mm, z = -1.5 mm"
    found["constraints"][3].update(lower=None, upper=None, slack=None, where=place)
    text = words(found).text
    assert re.search(r"height\s*10\.030 mm\s*no bound\s*top at r = 0\.00 mm, z = −1\.5 mm", text)


def test_a_missed_share_is_marked(words):
    """81.3 % where 85 % was asked is a miss in the table, whatever the badge says."""
    read = words(changed(asked={"share": 0.85}))
    assert re.search(r"81\.32 ± 0\.04 %\s*at least 85 %\s*✗ missed", read.text)


def test_a_share_within_two_errors_of_the_wish_counts_as_met(words):
    """The table judges as the verdict does: short by 1.5 standard errors is met, by 3 it is missed."""
    for short, word in ((1.5, "✓ met"), (3.0, "✗ missed")):
        got = {"share": 0.85 - short * 0.001, "share_se": 0.001}
        text = words(changed(asked={"share": 0.85}, got=got)).text
        assert re.search(rf"at least 85 %\s*{word}", text), short


def test_a_shaped_beam_shows_its_deviation(words):
    """The rms deviation stands in the verdict table, and the headline speaks of a curve."""
    read = words(changed(asked={"kind": "shape", "share": None}, got={"shape_deviation": 0.082}))
    assert number(read.keys["got.shape_deviation"])[0] == pytest.approx(8.2)
    assert "in the given intensity curve, which ends at ±5.74°" in read.text


def test_disagreement_warns_first(words):
    """When the two traces disagree the headline forbids using the lens."""
    found = changed(verdict={"exit_code": 5, "word": "disagreement"}, agreement={"agrees": False})
    text = words(found).text
    assert "no figure here is to be trusted" in text and "✗ disagree" in text


def test_an_interrupted_run_says_so(words):
    """The reason and the advice are printed, the command in it as code."""
    stopped = {"reason": "interrupted", "advice": "`inverse design BRIEF --resume` carries on."}
    found = changed(verdict={"exit_code": 130, "word": "interrupted"}, stopped=stopped)
    read = words(found)
    assert "stopped by hand" in read.text
    assert "<code>inverse design BRIEF --resume</code> carries on." in read.html


def test_the_nearest_possible_brief_is_told_beside_the_asked_one(words):
    """Beyond the limit both wishes stand in the headline, the impossible one first."""
    original = {"kind": "spot", "half_angle_deg": 3.0, "share": 0.9, "aperture_mm": 20.0}
    text = words(changed(asked={"original": original})).text
    first = text.index("The brief asked for at least 90 % of the LED's light within ±3.00°")
    assert first < text.index("The nearest possible brief was designed instead: at least 80 %")


def test_a_share_above_the_limit_is_an_alarm(words):
    """More than physics allows, beyond chance, is not praised."""
    assert "something is wrong" not in words(changed(got={"share": 0.93})).text
    assert "something is wrong" in words(changed(got={"share": 0.93}, limit={"ceiling": 0.92})).text


def test_the_largest_losses_are_told_largest_first(words):
    """The three largest losses of the ledger stand in the words, in order, and no fourth."""
    text = words().text
    told = text[text.index("misses the target") : text.index("Paths through the lens")]
    lost = sorted(((v, k) for k, v in LEDGER.items() if k != "in target"), reverse=True)
    places = [told.index(f"{100 * v:.2f} %") for v, _ in lost[:3]]
    assert places == sorted(places)
    assert f"{100 * lost[3][0]:.2f} %" not in told
    assert "18.7 % " in text[text.index("What holds it back") :]  # 1 - 0.8132, by hand


def test_what_could_still_be_won_is_limit_minus_share(words):
    """92.30 % - 81.32 % = 11.0 %, by hand."""
    assert "the remaining 11.0 % is the most that a better shape could win" in words().text


def test_lumens_follow_from_the_leds_flux(words):
    """81.32 % of 320 lm is 260.2 lm, by hand; without a flux there is no such column."""
    assert "260.2 lm" in words().text
    assert "260.2 lm" not in words(changed(emitter=None)).text


def test_an_unknown_account_is_shown_under_its_name(words):
    """A ledger account nobody foresaw is neither dropped nor renamed."""
    found = changed(ledger={"lost_in_the_gate": 0.01})
    assert "lost in the gate" in words(found).text


def test_an_unknown_figure_is_shown_with_its_unit(words):
    """A photometric key nobody foresaw gets its unit from its suffix and its error from its neighbour."""
    read = words(changed(photometry={"edge_width_deg": 1.234, "edge_width_deg_se": 0.05}))
    assert read.keys["photometry.edge_width_deg"].replace("\u00a0", " ") == "1.23 ± 0.05°"


def test_cautions_are_printed_and_grow_with_an_estimate(words):
    """Eyes, sun, heat, pressure and rules are always there; a blue-light estimate is no classification."""
    text = words().text
    for caution in ("Eyes.", "Sun.", "near 100 °C", "near 125 °C", "not a pressure window", "Local codes"):
        assert caution in text
    estimate = words(changed(blue_light={"radiance_w_m2_sr": 5200.0}))
    assert "indication, not a classification" in estimate.text
    assert number(estimate.keys["blue_light.radiance_w_m2_sr"])[0] == 5200


def test_a_missing_solid_is_explained(words):
    """Without lens.step the page says why and what is left."""
    files = [f for f in FULL["files"] if f != "lens.step"]
    assert "There is no lens.step" in words(changed(files=files)).text
    assert "There is no lens.step" not in words().text


def test_every_file_of_a_run_has_a_purpose(full):
    """No file is listed without saying what it is, and every picture is listed."""
    html = full.html
    rows = re.findall(r"<tr><th scope=\"row\"><code>([^<]+)</code></th><td>([^<]*)</td>", html)
    assert {name for name, _ in rows} >= {*FULL["files"], "section.png", "spot.png"}
    assert all(purpose for _, purpose in rows)


def test_faint_paths_are_summed(words):
    """A path below 0.01 % of the light takes no row of its own."""
    text = words({**FULL, "paths": {"centre lens → exit": 0.8, "faint": 0.00009, "fainter": 0.00002}}).text
    assert re.search(r"2 weaker paths together\s*0\.0110 %", text) and "fainter" not in text


def test_a_limit_below_all_names_both_ceilings(words):
    """With 79.1 % before and 73.0 % after surface losses the headline gives both."""
    text = words(changed(limit={"ceiling": 0.791, "ceiling_with_losses": 0.7304})).text
    assert "Physics allows at most 79.1 %, or 73.0 % after the reflection at uncoated surfaces." in text


def test_designed_and_stray_paths_are_told_apart(words):
    """The three roads named by the verifier are designed, any other is stray."""
    text = words().text
    assert re.search(r"pocket wall → flank → exit\s*designed\s*54\.2 %", text)
    assert re.search(r"pocket wall → flank → through the step\s*stray\s*1\.13 %", text)


def test_an_empty_account_takes_no_row(words):
    """What is exactly zero, such as a port that is not there, is left out; the sum stays whole."""
    read = words()
    assert "ledger.reflected by the port" not in read.keys and "reflected by the port" not in read.text
    assert "100.00 %" in read.text


def test_the_wall_table_shows_every_distance(words):
    """Illuminance and diameters as in the result; a cone past 90° has no diameter."""
    text = words().text
    assert re.search(r"1 m\s*10600 lx\s*152 mm\s*214 mm", text)
    assert re.search(r"10 m\s*106 lx\s*1520 mm\s*not inside 90°", text)


def test_notes_of_the_run_are_printed(words):
    """Why a file is missing stands below the files, in place of the general remark."""
    found = changed(files=[f for f in FULL["files"] if f != "lens.step"])
    found["notes"] = ["lens.step was not written. Install `cad`."]
    read = words(found)
    assert "lens.step was not written. Install <code>cad</code>." in read.html
    assert "There is no lens.step" not in read.text


def test_many_starts_are_counted(words):
    """Ten starts are told one by one, the others counted."""
    starts = [{"family": f"f{i}", "start_score": 0.5, "end_score": 0.6, "kept": i == 0} for i in range(13)]
    text = words({**FULL, "search": starts}).text
    assert "f9" in text and "f10" not in text and "and 3 more." in text


def test_many_paths_are_summed(words):
    """Beyond twelve the weak paths share one row, so that the sum is kept."""
    read = words({**FULL, "paths": {f"way {i}": 0.01 for i in range(20)}})
    listed = [k for k in read.keys if k.startswith("paths")]
    assert len(listed) == 13
    assert sum(number(read.keys[k])[0] for k in listed) == pytest.approx(20.0)


def test_a_missing_folder_is_reported(tmp_path):
    """Writing into a folder that is not there raises, and makes nothing."""
    with pytest.raises(FileNotFoundError):
        report.write(tmp_path / "nowhere", {}, [], None, {})
    assert list(tmp_path.iterdir()) == []


def test_a_failed_write_leaves_the_old_page(tmp_path, monkeypatch):
    """When the disk fails at the last step the earlier report is whole and no temporary file stays."""
    report.write(tmp_path, {"name": "earlier"}, [], None, {})
    before = (tmp_path / "report.html").read_bytes()

    def fail(*_):
        raise OSError("disk full")

    monkeypatch.setattr("os.replace", fail)
    with pytest.raises(OSError, match="disk full"):
        report.write(tmp_path, {"name": "later"}, [], None, {})
    assert [p.name for p in tmp_path.iterdir()] == ["report.html"]
    assert (tmp_path / "report.html").read_bytes() == before


def test_nothing_is_drawn_on_import():
    """Importing the room loads neither matplotlib nor jinja2; drawing never loads pyplot."""
    script = (
        "import sys; from inverse import report;"
        "assert 'matplotlib' not in sys.modules and 'jinja2' not in sys.modules;"
        "import inverse.report.page;"
        "assert 'matplotlib' in sys.modules and 'matplotlib.pyplot' not in sys.modules"
    )
    subprocess.run([sys.executable, "-c", script], check=True)
