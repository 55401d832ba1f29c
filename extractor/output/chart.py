"""A native chart of effects with their confidence limits, and the numbers it is drawn from."""

from __future__ import annotations

from collections.abc import Hashable, Mapping

import pandas as pd
from openpyxl.chart import BarChart, Reference
from openpyxl.chart.axis import ChartLines
from openpyxl.chart.data_source import NumDataSource, NumRef
from openpyxl.chart.error_bar import ErrorBars
from openpyxl.chart.shapes import GraphicalProperties
from openpyxl.chart.text import RichText
from openpyxl.drawing.line import LineProperties
from openpyxl.drawing.text import CharacterProperties, Paragraph, ParagraphProperties
from openpyxl.worksheet.worksheet import Worksheet

from extractor.output.scale import Scale, round_scale
from extractor.output.sheets import put_text, write_table
from extractor.quantities import VOCABULARY

MOST = 80
"""More bars cannot be read; the figure and the report show all of them."""
_PER_BAR, _FRAME = 0.62, 3.2
"""Height in centimetres of one bar, and of what is around them."""


def write_chart(sheet: Worksheet, effects: pd.DataFrame, metric: str, level: float) -> None:
    """Fill a sheet with the converted effects that have limits, and a bar chart of them."""
    shown = effects[(effects["status"] == "converted") & effects["ci_low"].notna()]
    part = shown.head(MOST)
    frame = pd.DataFrame(
        {
            "effect": [label(row) for row in part.to_dict("records")],
            "estimate": part["estimate"].to_numpy(),
            "ci_low": part["ci_low"].to_numpy(),
            "ci_high": part["ci_high"].to_numpy(),
            "below": (part["estimate"] - part["ci_low"]).clip(lower=0).to_numpy(),
            "above": (part["ci_high"] - part["estimate"]).clip(lower=0).to_numpy(),
        }
    )
    write_table(sheet, frame, dict.fromkeys(frame.columns[1:], "0.000"))
    if frame.empty:
        put_text(sheet.cell(2, 1), "no effect with confidence limits")
        return
    if len(shown) > MOST:
        put_text(sheet.cell(len(frame) + 3, 1), f"the first {MOST} of {len(shown)} effects")
    ends = frame[["estimate", "ci_low", "ci_high"]]
    scale = round_scale(min(ends.min().min(), 0.0), max(ends.max().max(), 0.0))
    sheet.add_chart(_bars(sheet, len(frame), metric, level, scale), "H2")


def label(row: Mapping[Hashable, object]) -> str:
    """What an effect is called: study, outcome and effect, and its row."""
    words = [str(row[name]) for name in ("study", "outcome", "effect") if row[name]]
    return f"{', '.join(words)} (row {row['row']})" if words else f"row {row['row']}"


def _bars(sheet: Worksheet, count: int, metric: str, level: float, scale: Scale) -> BarChart:
    chart = BarChart()
    chart.type, chart.style, chart.gapWidth = "bar", 2, 60
    symbol = VOCABULARY[metric].symbol
    chart.title = f"{symbol} with {level * 100:g} % confidence limits"
    chart.legend = None
    chart.add_data(Reference(sheet, min_col=2, min_row=1, max_row=count + 1), titles_from_data=True)
    chart.set_categories(Reference(sheet, min_col=1, min_row=2, max_row=count + 1))
    series = chart.series[0]
    series.graphicalProperties = GraphicalProperties(
        solidFill="C9D6DF", ln=LineProperties(solidFill="5B7083", w=6350)
    )
    series.invertIfNegative = False
    title = sheet.title.replace("'", "''")

    def column(letter: str) -> NumDataSource:
        return NumDataSource(NumRef(f=f"'{title}'!${letter}$2:${letter}${count + 1}"))

    series.errBars = ErrorBars(
        errBarType="both",
        errValType="cust",
        plus=column("F"),
        minus=column("E"),
        spPr=GraphicalProperties(ln=LineProperties(solidFill="1F2933", w=15875)),
    )
    chart.x_axis.scaling.orientation = "maxMin"
    chart.x_axis.tickLblPos = "low"
    chart.x_axis.delete = chart.y_axis.delete = False
    chart.y_axis.scaling.min, chart.y_axis.scaling.max = scale.low, scale.high
    chart.y_axis.majorUnit = scale.step
    pale = GraphicalProperties(ln=LineProperties(solidFill="DDE3E8", w=6350))
    chart.y_axis.majorGridlines = ChartLines(spPr=pale)
    chart.y_axis.number_format = "0.0##"
    chart.y_axis.crosses = "max"
    chart.x_axis.txPr = chart.y_axis.txPr = _small()
    chart.height, chart.width = _FRAME + _PER_BAR * count, 22
    return chart


def _small() -> RichText:
    """Text of nine points."""
    small = CharacterProperties(sz=900)
    return RichText(p=[Paragraph(pPr=ParagraphProperties(defRPr=small), endParaRPr=small)])
