"""What every workflow job shares: its log, faults without a traceback, and progress."""

from __future__ import annotations

import sys
import traceback
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any, TextIO

from fogline.config import parse_config
from fogline.faults import InputError
from fogline.settings import AnalysisSettings

FAULT_STATUS = 2


@contextmanager
def job(log: str | Path) -> Iterator[TextIO]:
    """Run a job with a log file.

    A user's faults go to the log and stderr, one line each, and end the job with status 2; any
    other error leaves its traceback in the log and is raised.

    Parameters
    ----------
    log : path-like
        The job's log; its folder is made where missing.

    Yields
    ------
    text stream
        The open log.
    """
    Path(log).parent.mkdir(parents=True, exist_ok=True)
    with open(log, "w", encoding="utf-8", buffering=1) as stream:
        try:
            yield stream
        except InputError as error:
            print(error, file=stream)
            print(error, file=sys.stderr)
            sys.exit(FAULT_STATUS)
        except Exception:
            traceback.print_exc(file=stream)
            raise


def settings_of(snakemake: Any) -> AnalysisSettings:
    """Return the settings of the analysis that a job belongs to.

    Parameters
    ----------
    snakemake : object
        What Snakemake hands to a script: its ``config`` and ``wildcards``.
    """
    return parse_config(snakemake.config).analyses[snakemake.wildcards.analysis]
