"""Writes every file a conversion can give, in this process or under another locale and a shifted clock.

python -m tests.output.everything SHEET FOLDER
"""

from __future__ import annotations

import sys
from pathlib import Path

YEARS = 3
FORMATS = ("dta", "html", "json", "parquet", "prov", "xlsx")


def write_everything(sheet: Path, folder: Path, metric: str = "hedges_g") -> None:
    """The output folder with all formats and tables, and the figure in all of its formats."""
    from extractor.api import convert
    from extractor.output.figure import ENDINGS, write_figure
    from extractor.output.package import write_conversion
    from extractor.output.request import Request
    from extractor.table import Assumption

    result = convert(sheet, to=metric)
    outcomes = Assumption(0.5, "review protocol")
    request = Request(
        sheet=str(sheet), metric=metric, formats=FORMATS, covariance=True, sensitivity=True, outcomes=outcomes
    )
    write_conversion(folder, result, request, force=False, tick=lambda *_: None)
    for ending in ENDINGS:
        write_figure(result.effects, folder / f"figure{ending}")


def _shift_the_clock() -> None:
    """Let every clock Python offers run some years ahead.

    Compiled packages take hold of the class of dates when they are loaded, so that they must be there before.
    """
    import datetime
    import time

    import matplotlib.backends.backend_pdf
    import matplotlib.backends.backend_svg
    import openpyxl
    import pandas as pd
    import pyarrow.parquet

    assert all((matplotlib, openpyxl, pd, pyarrow))

    ahead = YEARS * 366 * 86_400
    real_time, real_ns, real_local, real_gmt = time.time, time.time_ns, time.localtime, time.gmtime
    real = datetime.datetime

    class Later(real):
        @classmethod
        def now(cls, tz: datetime.tzinfo | None = None) -> Later:
            return cls.fromtimestamp(time.time(), tz)

        @classmethod
        def today(cls) -> Later:
            return cls.now()

    time.time = lambda: real_time() + ahead
    time.time_ns = lambda: real_ns() + ahead * 10**9
    time.localtime = lambda at=None: real_local(time.time() if at is None else at)
    time.gmtime = lambda at=None: real_gmt(time.time() if at is None else at)
    holders = ("datetime", "extractor", "matplotlib", "openpyxl")
    for module in [datetime, *sys.modules.values()]:
        package = getattr(module, "__name__", "").split(".")[0]
        if package in holders and getattr(module, "datetime", None) is real:
            module.datetime = Later
    assert datetime.datetime.now().year - real.now().year in (YEARS, YEARS + 1)


if __name__ == "__main__":
    import locale

    _shift_the_clock()
    locale.setlocale(locale.LC_ALL, "")
    write_everything(Path(sys.argv[1]), Path(sys.argv[2]))
