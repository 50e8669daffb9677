"""Fetch what a plan lists, file by file."""

from __future__ import annotations

import sys
from dataclasses import dataclass

from opacity.errors import LineListError
from opacity.pipeline.fetch.hitran import download_hitran, request_words
from opacity.pipeline.fetch.plan import FetchPlan
from opacity.pipeline.fetch.transfer import Patience, download
from opacity.recipe.downloads import UrlDownload


@dataclass(frozen=True)
class Fetched:
    """What came, as file and sha256, and one line for each file that did not."""

    files: tuple[tuple[str, str], ...]
    failures: tuple[str, ...]


def fetch_files(plan: FetchPlan, quiet: bool = False, patience: Patience | None = None) -> Fetched:
    """Fetch everything that is not there yet; one file that fails does not keep the others from being fetched.

    Raises LineListError before starting where a file that is there is the wrong one, ResourceError
    where the disk has no room, at the start or later.
    """
    plan.refuse_wrong()
    plan.refuse_too_large()
    patience = patience or Patience()
    files, failures = [], []
    for number, item in enumerate(plan.to_fetch, start=1):
        wanted = item.download
        name = f"{wanted.path.name} ({number} of {len(plan.to_fetch)})"
        try:
            if isinstance(wanted, UrlDownload):
                digest = download(wanted, patience, name, quiet)
            else:
                if not quiet:
                    print(f"{name}: asking {request_words(wanted)}; this can take minutes", file=sys.stderr, flush=True)
                digest = download_hitran(wanted)
        except LineListError as error:
            failures.append(str(error))
            if not quiet:
                print(f"{name}: failed", file=sys.stderr, flush=True)
        else:
            files.append((str(wanted.path), digest))
    return Fetched(tuple(files), tuple(failures))
