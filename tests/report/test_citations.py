"""BibTeX holds what a reference says, and nothing that it does not say."""

from __future__ import annotations

import re

import pytest

from opacity.check.citations import citations


def entry(text: str) -> dict[str, str]:
    (one,) = citations([text])
    assert one.text == text
    kind = re.match(r"@(\w+)\{(\w+),", one.bibtex)
    fields = dict(re.findall(r"^  (\w+) = \{(.*)\},$", one.bibtex, re.MULTILINE))
    return {"": kind[1], "key": kind[2], **fields}


@pytest.mark.parametrize(
    "text, expected",
    [
        (
            "Gordon et al. 2022, JQSRT 277, 107949, doi:10.1016/j.jqsrt.2021.107949",
            {
                "": "article",
                "key": "Gordon2022",
                "author": "Gordon and others",
                "year": "2022",
                "journal": "JQSRT",
                "volume": "277",
                "pages": "107949",
                "doi": "10.1016/j.jqsrt.2021.107949",
            },
        ),
        (
            "Zou & Varanasi 2002, JQSRT 75, 63",
            {
                "": "article",
                "key": "Zou2002",
                "author": "Zou and Varanasi",
                "year": "2002",
                "journal": "JQSRT",
                "volume": "75",
                "pages": "63",
            },
        ),
        (
            "Mueller et al. 2013, J. Phys. Chem. A 117, 13843 (CDMS 044505, version 2)",
            {
                "": "article",
                "key": "Mueller2013",
                "author": "Mueller and others",
                "year": "2013",
                "journal": "J. Phys. Chem. A",
                "volume": "117",
                "pages": "13843",
                "note": "(CDMS 044505, version 2)",
            },
        ),
        (
            "Benedict, Herman, Moore & Silverman 1956, Can. J. Phys. 34, 850-875",
            {
                "": "article",
                "key": "Benedict1956",
                "author": "Benedict and Herman and Moore and Silverman",
                "year": "1956",
                "journal": "Can. J. Phys.",
                "volume": "34",
                "pages": "850--875",
            },
        ),
    ],
)
def test_references_of_the_common_form(text, expected):
    assert entry(text) == expected


@pytest.mark.parametrize(
    "text",
    [
        "Sample list of this project, computed from published constants (data-samples/README.md)",
        "Benedict, Herman, Moore & Silverman 1956, Can. J. Phys. 34, 850 (abstract; journal reference from memory)",
        "Gordon et al. 2022, JQSRT 277, 107949; Li et al. 2015, ApJS 216, 15",
        "HITRAN 2020",
        "Gordon 2022",
        "",
        "2022, JQSRT 277, 1",
        "in press, JQSRT 277, 1",
    ],
)
def test_anything_else_is_a_note_as_it_stands(text):
    found = entry(text)
    assert found[""] == "misc"
    assert found["note"].replace("\\", "") == text
    assert set(found) == {"", "key", "note"}


def test_a_doi_is_taken_from_any_text_that_has_one():
    assert entry("The list of Somebody, https://doi.org/10.1234/abc.5.")["doi"] == "10.1234/abc.5"
    assert "doi" not in entry("Two works, doi:10.1234/a and doi:10.1234/b")


def test_keys_differ_and_special_characters_are_written_for_tex():
    found = citations(["Zou 2002, J & K 1, 2", "Zou 2002, JQSRT 75, 64", "100 % {of} $x_1$ ~ \\input{y}\n@misc{z,"])
    keys = [re.match(r"@\w+\{(\w+),", one.bibtex)[1] for one in found]
    assert len(set(keys)) == 3
    assert r"J \& K" in found[0].bibtex
    assert r"100 \% \{of\} \$x\_1\$ \textasciitilde{} \textbackslash{}input\{y\} @misc\{z," in found[2].bibtex
    assert found[2].bibtex.count("\n@") == 0
