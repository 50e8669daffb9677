"""Names of files with and without the ending of a compression."""

from __future__ import annotations

from pathlib import Path

import pytest

from opacity.line_list.hapi_table import header_of, is_hapi
from opacity.line_list.read import is_catalogue
from opacity.recipe.formats import exomol_kind, plain_name


@pytest.mark.parametrize(
    "name, plain",
    [("x.par.gz", "x.par"), ("x.PAR.BZ2", "x.PAR"), ("x.par", "x.par"), ("a/x.cat.bz2", "a/x.cat"), (".gz", ".gz")],
)
def test_the_ending_of_a_compression_is_taken_off_whatever_its_case(name, plain):
    assert plain_name(name) == plain


def test_all_formats_go_by_the_plain_name():
    assert exomol_kind("X.Trans.Bz2") == "trans"
    assert is_catalogue(Path("c.CAT.GZ"), None)
    assert is_hapi(Path("x.data.GZ"))
    assert header_of(Path("a/x.data.bz2")) == Path("a/x.header")
