"""Lines from HITRAN through hapi: hapi's own code against a server here, and a stand-in that misbehaves."""

from __future__ import annotations

import io
import json
import socket
from pathlib import Path
from typing import Any

import pytest

from opacity.errors import LineListError, ResourceError
from opacity.line_list.read import read_lines
from opacity.molecule.hapi_tables import hapi
from opacity.pipeline.fetch import hitran
from opacity.pipeline.fetch.hitran import check_request, download_hitran, request_words
from opacity.recipe.downloads import HitranDownload

SAMPLES = Path(__file__).parents[3] / "data-samples"
RECORDS = (SAMPLES / "carbon-monoxide.par").read_bytes().splitlines(keepends=True)[:5]
EXTRA = b"".join(one.rstrip(b"\n") + b",0.07,0.6\n" for one in RECORDS)


def query(folder: Path, parameters: tuple[str, ...] = ("gamma_h2", "n_h2"), **changes: Any) -> HitranDownload:
    plain = not parameters
    given = {
        "molecule": 5,
        "isotopologues": (1, 2),
        "range": (1880.0, 1930.0),
        "parameters": parameters,
        "path": folder / "lines" / ("CO.par" if plain else "CO.data"),
        "header": None if plain else folder / "lines" / "CO.header",
    }
    return HitranDownload(**{**given, **changes})


class FakeHapi:
    """Writes a table as hapi does: into the folder of its settings, with much talk on stdout."""

    ISO = hapi().ISO
    ISO_INDEX = hapi().ISO_INDEX
    PARAMETER_META = hapi().PARAMETER_META

    def __init__(self, data: bytes, error: BaseException | None = None, extra: int = 2) -> None:
        self.VARIABLES = {"BACKEND_DATABASE_NAME": "before"}
        self.LOCAL_TABLE_CACHE: dict[str, Any] = {"CO": "a user's table"}
        self.data, self.error, self.extra = data, error, extra
        self.asked: list[Any] = []

    def fetch_by_ids(self, TableName, iso_id_list, numin, numax, ParameterGroups=(), Parameters=()):
        assert socket.getdefaulttimeout() == hitran.SILENCE
        self.asked.append((TableName, iso_id_list, numin, numax, Parameters))
        print("BEGIN DOWNLOAD")
        folder = Path(self.VARIABLES["BACKEND_DATABASE_NAME"])
        (folder / f"{TableName}.data").write_bytes(self.data)
        if self.error is not None:
            raise self.error
        content = {"table_name": TableName, "extra": [f"column{i}" for i in range(self.extra)]}
        (folder / f"{TableName}.header").write_text(json.dumps(content))
        self.LOCAL_TABLE_CACHE[TableName] = {"filehandler": io.BytesIO()}


@pytest.fixture
def fake(monkeypatch):
    def put(data: bytes, error: BaseException | None = None, extra: int = 2) -> FakeHapi:
        made = FakeHapi(data, error, extra)
        monkeypatch.setattr(hitran, "hapi", lambda: made)
        return made

    return put


def names_in(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_data_and_header_come_under_their_names(fake, tmp_path, capsys):
    made = fake(EXTRA)
    digest = download_hitran(query(tmp_path))
    lines = tmp_path / "lines"
    assert made.asked == [("CO", [26, 27], 1880.0, 1930.0, ["gamma_h2", "n_h2"])]
    assert (lines / "CO.data").read_bytes() == EXTRA
    assert json.loads((lines / "CO.header").read_text())["table_name"] == "CO"
    assert names_in(lines) == ["CO.data", "CO.data.sha256", "CO.header"]
    words = "HITRAN molecule 5, isotopologues 1, 2, 1880 to 1930 cm-1, with gamma_h2, n_h2"
    assert (lines / "CO.data.sha256").read_text() == f"{digest}  CO.data\n# {words}\n"
    assert capsys.readouterr() == ("", "")


def test_hapi_is_left_as_it_was(fake, tmp_path):
    made = fake(EXTRA)
    download_hitran(query(tmp_path))
    assert made.VARIABLES == {"BACKEND_DATABASE_NAME": "before"}
    assert made.LOCAL_TABLE_CACHE == {"CO": "a user's table"}
    assert socket.getdefaulttimeout() is None


def test_plain_records_take_the_name_of_the_recipe(fake, tmp_path):
    fake(b"".join(RECORDS), extra=0)
    download_hitran(query(tmp_path, parameters=()))
    assert (tmp_path / "lines" / "CO.par").read_bytes() == b"".join(RECORDS)
    assert names_in(tmp_path / "lines") == ["CO.par", "CO.par.sha256"]


@pytest.mark.parametrize(
    "error, words",
    [
        (Exception("Cannot connect to http://hitran.org. Try again\nor edit"), "Cannot connect to http://hitran.org."),
        (Exception("You have exceeded the daily limit of API queries."), "You have exceeded the daily limit"),
        (TimeoutError(), "TimeoutError"),
        (KeyError("x"), "'x'"),
    ],
)
def test_what_hapi_reports_is_one_line_with_a_remedy(fake, tmp_path, error, words):
    made = fake(EXTRA[:100], error)
    with pytest.raises(LineListError) as caught:
        download_hitran(query(tmp_path))
    message = str(caught.value)
    assert message.startswith(f"HITRAN molecule 5, isotopologues 1, 2, 1880 to 1930 cm-1, with gamma_h2, n_h2: {words}")
    assert f"save it as {tmp_path / 'lines' / 'CO.data'} and its header as CO.header" in message
    assert "\n" not in message
    assert names_in(tmp_path / "lines") == []
    assert made.VARIABLES == {"BACKEND_DATABASE_NAME": "before"}


def test_an_interrupt_passes_and_leaves_nothing(fake, tmp_path):
    made = fake(EXTRA, KeyboardInterrupt())
    with pytest.raises(KeyboardInterrupt):
        download_hitran(query(tmp_path))
    assert names_in(tmp_path / "lines") == []
    assert made.LOCAL_TABLE_CACHE == {"CO": "a user's table"}


@pytest.mark.parametrize(
    "data, extra, words",
    [
        (b"", 2, "no lines in this range"),
        (b"\n", 2, "no lines in this range"),
        (b"<html>\n", 2, "an answer that holds no lines: <html>"),
        (EXTRA.replace(b" 5", b" 6", 1), 2, "an answer that holds no lines:  6"),
        (EXTRA[:-6], 2, "an answer that breaks off in its last line"),
        (EXTRA[:-40], 2, "an answer that breaks off in its last line"),
        (b"".join(RECORDS)[:-2], 0, "an answer that breaks off in its last line"),
    ],
)
def test_answers_that_are_no_lists_are_refused(fake, tmp_path, data, extra, words):
    fake(data, extra=extra)
    with pytest.raises(LineListError) as caught:
        download_hitran(query(tmp_path, parameters=("gamma_h2", "n_h2") if extra else ()))
    assert words in str(caught.value)
    assert names_in(tmp_path / "lines") == []


def test_a_wrong_checksum_leaves_nothing(fake, tmp_path):
    fake(EXTRA)
    with pytest.raises(LineListError, match=f"wrong checksum; expected sha256 {'0' * 64}, found "):
        download_hitran(query(tmp_path, sha256="0" * 64))
    assert names_in(tmp_path / "lines") == []


def test_a_place_that_cannot_be_written(fake, tmp_path):
    fake(EXTRA)
    (tmp_path / "lines").write_text("a file")
    with pytest.raises(ResourceError, match=r"cannot be written \(File exists\)"):
        download_hitran(query(tmp_path))


def test_requests_that_nobody_could_answer_are_not_made(fake, tmp_path):
    made = fake(EXTRA)
    with pytest.raises(LineListError, match=r"unknown parameter; expected one of hapi's, found gama_h2; did you mean"):
        download_hitran(query(tmp_path, parameters=("gama_h2",)))
    with pytest.raises(LineListError, match="molecule 5, isotopologue 9: unknown isotopologue; expected local numbers"):
        check_request(query(tmp_path, isotopologues=(1, 9)))
    with pytest.raises(LineListError, match="molecule 999, isotopologue 1: unknown isotopologue"):
        check_request(query(tmp_path, molecule=999))
    check_request(query(tmp_path, parameters=("gamma_H2",)))
    assert made.asked == []


@pytest.mark.filterwarnings("ignore::ResourceWarning", "ignore::pytest.PytestUnraisableExceptionWarning")
@pytest.mark.parametrize("parameters", [(), ("gamma_h2", "n_h2")], ids=["plain", "with columns"])
def test_through_hapi_itself(server, tmp_path, monkeypatch, capsys, parameters):
    """hapi's own download, from a server here; what it writes is what the reader of line lists reads."""
    asked = []

    def lbl(handler) -> None:
        asked.append(handler.path)
        server.serve("/any", EXTRA if parameters else b"".join(RECORDS))(handler)

    class Routes(dict):
        def get(self, path):
            return lbl if path.startswith("/lbl/api?") else None

    server.routes = Routes()
    monkeypatch.setitem(hapi().VARIABLES, "GLOBAL_HOST", server.url(""))
    wanted = query(tmp_path, parameters=parameters)
    download_hitran(wanted)
    (path,) = asked
    assert "iso_ids_list=26,27&numin=1880.0&numax=1930.0" in path
    assert ("request_params=par_line,gamma_h2,n_h2" in path) == bool(parameters)
    lines = read_lines(wanted.path)
    assert len(lines.wavenumber) == len(RECORDS)
    assert capsys.readouterr().out == ""
    assert "CO" not in hapi().LOCAL_TABLE_CACHE
    assert [one for one in names_in(tmp_path / "lines") if one.startswith(".")] == []


@pytest.mark.filterwarnings("ignore::ResourceWarning", "ignore::pytest.PytestUnraisableExceptionWarning")
def test_hapi_itself_without_a_network(tmp_path, capsys):
    with pytest.raises(LineListError, match=r"cm-1: Cannot connect to http://hitran.org.*download it by hand"):
        download_hitran(query(tmp_path, parameters=()))
    assert capsys.readouterr() == ("", "")
    assert names_in(tmp_path / "lines") == []


def test_words_of_a_request(tmp_path):
    assert request_words(query(tmp_path, parameters=())) == ("HITRAN molecule 5, isotopologues 1, 2, 1880 to 1930 cm-1")
