"""What a report says, read without a browser."""

from __future__ import annotations

import json
import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

import opacity
from opacity.errors import InputError, ResourceError, TableError
from opacity.pipeline.report import report
from opacity.tables.model import CrossSectionTable
from opacity.tables.write import write_cross_section_table

KINDS = ("cross-section", "k-coefficient", "profile", "alone")
OLD = Path(__file__).parents[1] / "tables" / "data" / "version-1.cross-section.h5"


@pytest.mark.parametrize("kind", KINDS)
def test_a_page_is_well_formed_and_every_picture_has_its_text(pages, read_page, kind):
    page = read_page(pages[kind])
    assert page.faults == []
    assert [name for name, count in page.ids.items() if count > 1] == []
    for one in page.all("svg"):
        if "aria-hidden" in one.attributes:
            continue
        assert one.attributes["role"] == "img"
        title, text = one.all("title"), one.all("desc")
        assert len(title) == len(text) == 1
        assert re.search(r"\d", text[0].text), "a text that states numbers"
        assert one.attributes["aria-labelledby"] == f"{title[0].attributes['id']} {text[0].attributes['id']}"
    for referred in re.findall(r"url\(#([^)]+)\)", page.source):
        assert page.ids[referred] == 1


@pytest.mark.parametrize("kind", KINDS)
def test_a_page_needs_nothing_beyond_itself(pages, read_page, kind):
    page = read_page(pages[kind])
    assert {one.tag for one in page.all("script") + page.all("link") + page.all("img") + page.all("iframe")} == set()
    assert "default-src 'none'" in page.source
    assert not re.search(r"\b(src|xlink:href)=|@import|url\((?!#)", page.source)
    assert all(one.attributes["href"].startswith("#") for one in page.all("a"))


def test_numbers_are_those_of_the_table(pages, read_page, built):
    page = read_page(pages["cross-section"])
    with opacity.open_table(built / "tables" / "co.cross-section.h5") as table:
        checks, provenance, recipe = table.checks, table.provenance, table.recipe
        peak = float(table.spectrum(1, 1).max())
        place = float(table.wavenumber[table.spectrum(1, 1).argmax()])
    for row in checks["results"]:
        assert " ".join(row["detail"].split()) in page.text
        if row["value"] is not None:
            assert f"{row['value']:+.2e}" in page.text
            assert f"{row['limit']:.1e}" in page.text
    assert f"{checks['audit']['largest_error']:.2e}" in page.text
    assert str(checks["audit"]["seed"]) in page.text
    assert provenance["line_lists"][0]["sha256"] in page.text
    for name, version in provenance["packages"].items():
        assert f"{name} {version}" in page.text
    assert any(one.text == " ".join(recipe.split()) for one in page.all("pre"))
    text = page.pictures()["Cross-section at 1 bar"]
    found = re.search(r"480 K: largest ([\d.]+)\u00d710⁻(\S+) at ([\d.]+) cm⁻¹", text)
    exponent = int(found[2].translate(str.maketrans("⁰¹²³⁴⁵⁶⁷⁸⁹", "0123456789")))
    assert float(found[1]) * 10.0**-exponent == pytest.approx(peak, rel=5e-3)
    assert float(found[3]) == pytest.approx(place, rel=1e-7)


def test_a_table_of_cross_sections_has_its_pictures(pages, read_page, built):
    page = read_page(pages["cross-section"])
    titles = page.pictures()
    assert {"Closure at every node", "Interpolation at cell middles", "Strength lost beyond cut-off and grid"} <= {
        *titles
    }
    assert "Partition function of (12C)(16O) against independent values" in titles
    with opacity.open_table(built / "tables" / "co.cross-section.h5") as table:
        worst = max(abs(one["difference"]) for one in table.checks["closure"])
        lost = max(1.0 - one["in_reach"] / one["strength"] for one in table.checks["closure"])
        band = next(row for row in table.checks["results"] if row["check"] == "band middle of 1-0")
        cells = table.checks["interpolation"]["by_cell"]
    exponent = int(f"{worst:.1e}".split("e")[1])
    assert str(-exponent).translate(str.maketrans("0123456789", "⁰¹²³⁴⁵⁶⁷⁸⁹")) in titles["Closure at every node"]
    assert f"the largest is {lost:.2e}" in titles["Strength lost beyond cut-off and grid"]
    said = titles["Band strengths against published values"]
    assert f"middle of 1-0: {100.0 * band['value']:+.2f} %, accepted -2 to +2 %" in said
    assert [one["temperature"] for one in cells] == [pytest.approx((296.0 * 480.0) ** 0.5)]


def test_a_table_of_k_coefficients_has_its_pictures(pages, read_page, built):
    page = read_page(pages["k-coefficient"])
    assert "k-distributions" in page.headings()
    titles = page.pictures()
    assert {"k against g, 8 points", "Certificate: error of transmission by band"} <= {*titles}
    assert "Strength lost beyond cut-off and grid" in titles
    with opacity.open_table(built / "tables" / "co.k-coefficient.h5") as table:
        largest = max(abs(one["largest"]) for one in table.checks["certificate"]["bands"])
        assert table.k(0, 0)[0].max() > 0.0
    assert f"transmission within {largest:.2e}, the largest of 4 bands" in page.text
    assert "Band 2145 to 2146 cm⁻¹: 296 K, 0.01 bar:" in titles["k against g, 8 points"]


def test_losses_from_the_lines_are_those_of_closure(pages, read_page):
    """The parts add up to the whole, and the whole is the one that the accounts of closure tell without lines."""
    again, stored = (
        read_page(pages[kind]).pictures()["Strength lost beyond cut-off and grid"]
        for kind in ("cross-section", "alone")
    )
    parted = re.findall(r"(\S+ K, \S+ bar): (\S+) \(cut-off (\S+), ends (\S+?)\)\.", again)
    assert len(parted) == 4
    for node, whole, cutoff, ends in parted:
        assert float(cutoff) + float(ends) == pytest.approx(float(whole), rel=0.05)
        assert f"{node}: {whole}." in stored


def test_along_a_profile_closure_is_drawn_node_by_node(pages, read_page):
    page = read_page(pages["profile"])
    assert "3 nodes along the profile, largest" in page.pictures()["Closure at every node"]
    assert "Interpolation at cell middles" not in page.pictures()
    assert "Cross-section at nodes of the profile" in page.pictures()


def test_without_its_recipe_a_table_is_told_as_stored(pages, read_page):
    page = read_page(pages["alone"])
    assert "recipe not at hand: all but integrity as stored by the build" in page.text
    assert "All 4 checks agree." in page.text
    assert "Partition function of (12C)(16O) against independent values" in page.pictures()


def test_texts_of_another_make_are_refused_in_one_line(sigma, tmp_path):
    copy = tmp_path / OLD.name
    shutil.copyfile(OLD, copy)
    with opacity.open_table(sigma) as table:
        provenance = table.provenance
    made = altered(sigma, tmp_path, provenance={**provenance, "line_lists": ["CO.par"]})
    for path in (copy, made):
        with pytest.raises(TableError, match="not as this version writes them") as caught:
            report(path, tmp_path / "page.html")
        assert "\n" not in str(caught.value)
    assert not (tmp_path / "page.html").exists()


def test_tables_made_before_cells_were_kept_tell_the_worst(sigma, tmp_path, read_page):
    with opacity.open_table(sigma) as table:
        checks = json.loads(json.dumps(table.checks))
    del checks["interpolation"]["by_cell"]
    page = read_page(report(altered(sigma, tmp_path, checks=checks), tmp_path / "page.html"))
    assert "1 value, median" in page.pictures()["Interpolation at cell middles"]


def altered(path: Path, folder: Path, **changes) -> Path:
    """A copy of a table with other texts in it, or values, as another make might have written it."""
    with opacity.open_table(path) as table:
        values = np.array([[table.spectrum(i, j) for j in range(2)] for i in range(2)])
        content = {
            "title": table.title,
            "formula": table.formula,
            "temperature": table.temperature,
            "pressure": table.pressure,
            "wavenumber": table.wavenumber,
            "cross_section": values,
            "recipe": table.recipe,
            "provenance": table.provenance,
            "checks": table.checks,
        }
    made = folder / "altered.cross-section.h5"
    write_cross_section_table(made, CrossSectionTable(**{**content, **changes}))
    return made


@pytest.fixture
def sigma(built):
    return built / "tables" / "co.cross-section.h5"


def test_a_differing_check_is_told_first_by_word_and_shape(sigma, built, tmp_path, read_page):
    with opacity.open_table(sigma) as table:
        values = np.array([[table.spectrum(i, j) for j in range(2)] for i in range(2)])
    values[1, 1, 400:] *= 1.05
    made = altered(sigma, tmp_path, cross_section=values)
    page = read_page(report(made, tmp_path / "page.html", built / "co.toml"))
    verdict = next(one for one in page.all("p") if "verdict" in one.attributes.get("class", ""))
    assert re.match(r"2 of 4 checks differ \(2 agree\): do not use this table before you know why", verdict.text)
    assert len(verdict.all("svg")) == 1
    row = next(one for one in page.all("tr") if one.text.startswith("closure"))
    assert "differs" in row.text
    assert "2 beyond their limit" in page.text or "1 beyond their limit" in page.text
    shapes = {
        word: re.findall(rf'<span class="word"><svg[^>]*>(.*?)</svg>{word}<', page.source)
        for word in ("agrees", "differs")
    }
    assert shapes["agrees"]
    assert not {*shapes["agrees"]} & {*shapes["differs"]}


def test_infinite_errors_which_json_has_as_null_are_told(sigma, tmp_path, read_page):
    with opacity.open_table(sigma) as table:
        checks = json.loads(json.dumps(table.checks))
    checks["audit"]["largest_error"] = None
    checks["results"][1] |= {"value": None, "verdict": "differs"}
    checks["interpolation"]["by_cell"][0]["p99"] = None
    page = read_page(report(altered(sigma, tmp_path, checks=checks), tmp_path / "page.html"))
    assert "infinite, relative" in page.text
    assert page.faults == []


EVIL = "<script>alert(1)</script>\"'&<!--<b>\x07"


def test_hostile_texts_stay_texts(sigma, tmp_path, read_page):
    with opacity.open_table(sigma) as table:
        provenance, checks = (json.loads(json.dumps(one)) for one in (table.provenance, table.checks))
        recipe = table.recipe
    recipe += f"\n# {EVIL[:-1]}\n"
    provenance["line_lists"][0] |= {"file": EVIL, "reference": EVIL}
    provenance["references"] = [EVIL, "Gordon et al. 2022, <b>J</b> 1, 2"]
    provenance["packages"][EVIL] = EVIL
    checks["results"][0] |= {"check": EVIL, "detail": EVIL, "verdict": EVIL}
    checks["warnings"] = [EVIL]
    checks["assumptions"] = [{"what": EVIL, "lines": 1}]
    checks["ledger"]["left_out"] = {EVIL: 2}
    checks["uncertainty"] = uncertainty(source=EVIL)
    folder = tmp_path / "<img src=x onerror=alert(1)>"
    folder.mkdir()
    made = altered(sigma, folder, title=EVIL[:-1], recipe=recipe, provenance=provenance, checks=checks)
    page = read_page(report(made, tmp_path / "page.html"))
    assert page.faults == []
    assert page.all("script") == page.all("img") == page.all("b") == []
    assert not any(name.startswith("on") for one in walk(page.root) for name in one.attributes)
    assert EVIL[:-1] in page.text
    assert "\x07" not in page.source
    assert page.source.count("&lt;script&gt;") >= 9


def walk(element):
    yield element
    for child in element.children:
        yield from walk(child)


def uncertainty(**changes):
    return {
        "bands": [[2145.0, 2147.0], [2147.0, 2149.0]],
        "nodes": [[296.0, 0.01], [480.0, 1.0]],
        "strength_correlated": [[0.02, 0.03], [0.05, 0.1]],  # by band, then by node
        "strength_uncorrelated": [[0.01, 0.015], [None, 0.02]],
        "width": 0.1,
        "position": {"largest": 1e-3},
        "not_stated": {"strength": 3},
        "source": "codes of the list",
        **changes,
    }


def test_published_bands_that_the_recipe_does_not_name_are_told_apart(tmp_path, write_recipe, opacity, read_page):
    """R(8) to R(10) of CO (Rubin et al. 2026, conference abstract) lie 1.2 to 1.9 % above the sample (its README):
    all three differ, and the table's own checks agree.
    """
    nodes = "temperature = [296.0, 480.0]\npressure = [1e-5, 1.0]"
    recipe = write_recipe("lines", wavenumber="{ start = 2174.0, stop = 2185.0, step = 0.002 }", nodes=nodes)
    assert opacity("build", recipe, "-o", tmp_path, "--quiet")[0] == 0
    table, page = tmp_path / "lines.cross-section.h5", tmp_path / "page.html"
    assert opacity("check", table, "--report", page, "--quiet")[0] == 0
    read = read_page(page)
    assert "All 3 checks agree; of 3 other published bands in its range 3 differ." in read.text
    said = read.pictures()["Band strengths against published values"]
    found = {int(j): float(d) for j, d in re.findall(r"1-0 line R\((\d+)\): (\S+) %, accepted -0.8 to \+0.8 %", said)}
    assert found == {8: pytest.approx(-1.2, abs=0.1), 9: pytest.approx(-1.8, abs=0.1), 10: pytest.approx(-1.7, abs=0.1)}
    (tmp_path / "lines.log.json").unlink()
    opacity("check", table, "--report", page, "--quiet")
    assert "All 3 checks agree." in read_page(page).text  # nothing is said of them without the lines


def test_a_line_whose_wings_leave_its_range_is_not_judged(tmp_path, write_recipe, opacity, read_page):
    """At 0.01 bar (HWHM 6e-4 cm-1) a range of 0.05 cm-1 to both sides lacks 2/pi x 6e-4/0.05: 0.8 %."""
    recipe = write_recipe("lines", wavenumber="{ start = 2174.0, stop = 2185.0, step = 0.002 }")
    opacity("build", recipe, "-o", tmp_path, "--quiet")
    page = tmp_path / "page.html"
    opacity("check", tmp_path / "lines.cross-section.h5", "--report", page, "--quiet")
    read = read_page(page)
    rows = [one.text for one in read.all("tr") if one.text.startswith("band 1-0 line")]
    assert len(rows) == 3
    assert all("cannot judge" in one and re.search(r"change the band by -0\.[789]%", one) for one in rows)
    assert "Band strengths against published values" not in read.pictures()


def test_a_step_too_coarse_is_drawn(tmp_path, write_recipe, opacity, read_page, pages):
    title = "Lines narrower than the step resolves"
    assert title not in read_page(pages["cross-section"]).pictures()
    recipe = write_recipe("coarse", wavenumber="{ start = 2145.0, stop = 2149.0, step = 0.05 }")
    opacity("build", recipe, "-o", tmp_path, "--quiet")
    made, page = tmp_path / "coarse.cross-section.h5", tmp_path / "page.html"
    opacity("check", made, "--report", page, "--quiet")
    said = read_page(page).pictures()[title]
    # At 0.01 bar Doppler's width (HWHM 0.0025 cm-1) is a twentieth of the step, at 1 bar Lorentz's is above it.
    assert re.search(r"4 values, .* 2 beyond their limit", said)


def test_of_many_bands_those_with_the_largest_uncertainty_are_listed(sigma, tmp_path, read_page):
    with opacity.open_table(sigma) as table:
        checks = table.checks
    bands = [[2000.0 + band, 2001.0 + band] for band in range(100)]
    sizes = [0.001 * (band + 1) for band in range(100)]
    stated = uncertainty(
        bands=bands, strength_correlated=[[one, one] for one in sizes], strength_uncorrelated=[[None] * 2] * 100
    )
    made = altered(sigma, tmp_path, checks={**checks, "uncertainty": stated})
    page = read_page(report(made, tmp_path / "page.html"))
    assert "the 12 of 100 bands with the largest" in page.text
    heads = [one.text for one in page.all("th") if re.fullmatch(r"20\d\d to 2\d\d\d", one.text)]
    assert (len(heads), heads[0], heads[-1]) == (12, "2088 to 2089", "2099 to 2100")


def test_the_lists_own_uncertainty_is_shown_where_it_is_there(sigma, tmp_path, read_page):
    with opacity.open_table(sigma) as table:
        checks = table.checks
    without = {name: value for name, value in checks.items() if name != "uncertainty"}
    silent = read_page(report(altered(sigma, tmp_path, checks=without), tmp_path / "silent.html"))
    assert "The list's own uncertainty" not in silent.headings()
    page = read_page(
        report(altered(sigma, tmp_path, checks={**checks, "uncertainty": uncertainty()}), tmp_path / "p.html")
    )
    assert "The list's own uncertainty" in page.headings()
    row = next(one for one in page.all("tr") if one.text.startswith("2145 to 2147"))
    assert [cell.text for cell in row.all("td")] == ["2 to 3 %", "1 to 1.5 %"]
    assert (
        "lines off together, 480 K: at most 10 % at 2148 cm⁻¹." in page.pictures()["The list's own uncertainty by band"]
    )
    assert "strength 3" in page.text
    for other in ({"bands": 3}, uncertainty(nodes=[[1.0, 2.0]]), [1], "words"):
        again = report(altered(sigma, tmp_path, checks={**checks, "uncertainty": other}), tmp_path / "q.html")
        assert "The list's own uncertainty" not in read_page(again).headings()


def test_paths_are_judged_before_anything_is_checked(sigma, tmp_path):
    with pytest.raises(
        InputError, match=r"page\.pdf: a report is written as HTML; expected a name that ends in \.html"
    ):
        report(sigma, tmp_path / "page.pdf")
    with pytest.raises(ResourceError, match=r"page\.html: cannot be written; found no folder"):
        report(sigma, tmp_path / "nowhere" / "page.html")
    (tmp_path / "folder.html").mkdir()
    with pytest.raises(ResourceError, match="a folder of this name"):
        report(sigma, tmp_path / "folder.html")
    assert sorted(os.listdir(tmp_path)) == ["folder.html"]


def test_a_page_is_there_whole_or_not_at_all(sigma, tmp_path, monkeypatch):
    page = tmp_path / "page.html"
    page.write_text("as before", encoding="utf-8")

    def full(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("opacity.tables.atomic.write_all", full)
    with pytest.raises((ResourceError, OSError)):
        report(sigma, page)
    assert page.read_text(encoding="utf-8") == "as before"
    assert os.listdir(tmp_path) == ["page.html"]


def test_the_same_table_gives_the_same_bytes(sigma, tmp_path):
    one, other = (report(sigma, tmp_path / name).read_bytes() for name in ("a.html", "b.html"))
    assert one == other


def test_no_drawing_package_is_needed(sigma, tmp_path):
    code = (
        "import sys; sys.modules['matplotlib'] = None\n"
        f"import opacity; opacity.report({str(sigma)!r}, {str(tmp_path / 'page.html')!r})"
    )
    subprocess.run([sys.executable, "-c", code], check=True, cwd=Path(opacity.__file__).parents[1])
    assert (tmp_path / "page.html").stat().st_size > 20_000


def test_the_command_tells_where_and_json_still_works(built, sigma, tmp_path, opacity):
    page = tmp_path / "page.html"
    code, out, err = opacity("check", sigma, "--report", page, "--quiet")
    assert (code, err, out.splitlines()[-1]) == (0, "", f"report: {page}")
    code, out, err = opacity("check", sigma, "--report", page, "--quiet", "--json")
    assert (code, err) == (0, f"report: {page}\n")
    assert json.loads(out) == json.loads(opacity("check", sigma, "--quiet", "--json")[1])


def test_two_tables_of_a_recipe_share_a_page(built, tmp_path, opacity, read_page):
    target = tmp_path / "page.html"
    opacity("check", built / "co.toml", "-o", built / "tables", "--report", target, "--quiet")
    page = read_page(target)
    assert page.faults == []
    assert max(page.ids.values()) == 1
    assert [one.attributes["id"] for one in page.all("article")] == ["t1", "t2"]
    assert [one.attributes["href"] for one in page.all("a")] == ["#t1", "#t2"]


def test_the_command_refuses_in_one_line(built, tmp_path, samples, opacity):
    lines = {
        ("check", samples / "carbon-monoxide.par", "--report", tmp_path / "a.html"): (2, "--report: is of tables"),
        ("check", built / "co.toml", "-o", tmp_path, "--report", tmp_path / "a.html"): (1, "has no table here yet"),
        ("check", built / "tables" / "co.cross-section.h5", "--report", tmp_path / "a.txt"): (2, "ends in .html"),
    }
    for words, (expected, said) in lines.items():
        code, out, err = opacity(*words)
        assert (code, out, len(err.splitlines())) == (expected, "", 1)
        assert said in err
    assert os.listdir(tmp_path) == []
