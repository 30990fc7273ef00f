"""A sheet's charts, on a sheet of their own where a person looks before reading."""

from itertools import cycle

from openpyxl.chart import BarChart, Reference, ScatterChart, Series
from openpyxl.chart.layout import Layout, ManualLayout
from openpyxl.chart.shapes import GraphicalProperties
from openpyxl.utils import get_column_letter
from openpyxl.worksheet.worksheet import Worksheet

from cellfuncs import units
from workbooks.recipe import Chart, Histogram, Recipe, Table
from workbooks.template.sheets import (
    FIRST_ROW,
    INK,
    TITLE,
    TYPE_HERE,
    Book,
    letters_of,
    put,
    quoted,
)

MARKERS = (
    ("circle", TYPE_HERE),
    ("diamond", "B5651D"),
    ("square", INK),
    ("triangle", "7A9BB5"),
    ("x", "8C3B4A"),
)
"""Shapes and colours of the series: each differs in shape and brightness too"""


def chart_sheet(book: Book, recipe: Recipe, table: Table, rows: int) -> None:
    """Add the sheet with a table's charts, and the hidden one with what they draw."""
    charts = table.sheet.charts
    several = len(recipe.tables) + len(recipe.summaries) > 1
    title = f"{table.sheet.name[:24]} chart" if several else "Chart"
    sheet = book.sheet(title)
    sheet.page_setup.fitToHeight = 1
    put(sheet, "A1", recipe.text.title, TITLE)
    points = _points_sheet(book, table, rows)
    row = 3
    for chart in charts:
        drawn = _chart(table, chart, points, rows)
        sheet.add_chart(drawn, f"A{row}")
        row += 24
    for histogram in table.sheet.histograms:
        sheet.add_chart(_bars(table, histogram, points, rows), f"A{row}")
        row += 24


def _points_sheet(book: Book, table: Table, rows: int) -> Worksheet:
    """What the charts draw: #N/A, which no program draws, in place of an empty result."""
    points = book.sheet(f"{table.sheet.name[:24]} points")
    points.sheet_state = "hidden"
    letters = letters_of(table)
    for place, (key, unit) in enumerate(_drawn(table), 1):
        points.cell(1, place, f"points: {key}")
        factor = units.factor(table.columns[key].unit, unit)
        scale = "" if factor == 1 else f"*{factor!r}"
        shown_with = [
            f"ISNUMBER({quoted(table.sheet.name)}!{letters[y]}{{row}})"
            for chart in table.sheet.charts
            if key == chart.x
            for y in chart.y
        ]
        for row in range(FIRST_ROW, FIRST_ROW + rows):
            cell = f"{quoted(table.sheet.name)}!{letters[key]}{row}"
            drawn = f"ISNUMBER({cell})"
            if shown_with:
                # a point without a result must not stretch the axis
                drawn = f"AND({drawn},OR({','.join(shown_with).format(row=row)}))"
            points.cell(row, place, f"=IF({drawn},{cell}{scale},NA())")
    return points


def _bars(table: Table, histogram: Histogram, points: Worksheet, rows: int) -> BarChart:
    """Draw how often the values of a column occur, in bins of one width from least to largest."""
    letters = letters_of(table)
    place = points.max_column + 1
    used, counted, low, number = (get_column_letter(place + offset) for offset in range(4))
    last = FIRST_ROW - 1 + rows
    column = table.columns[histogram.of]
    for letter, words in ((used, "in use"), (counted, "to count"), (low, "middle"), (number, "n")):
        points[f"{letter}1"] = f"{histogram.of}: {words}"
    for row in range(FIRST_ROW, last + 1):
        cell = f"{quoted(table.sheet.name)}!{letters[histogram.of]}{row}"
        condition = f"ISNUMBER({cell})"
        if histogram.where:
            only = f"{quoted(table.sheet.name)}!{letters[histogram.where]}{row}"
            # an error value there must not become one of the whole count
            condition = f"IF(AND({condition},ISNUMBER({only})),{only}=1,FALSE())"
        points[f"{used}{row}"] = f'=IF({condition},{cell},"")'
        points[f"{counted}{row}"] = f"=IF({condition},{cell},1E+300)"
    area = f"${used}${FIRST_ROW}:${used}${last}"
    start, width = f"MIN({area})", f"((MAX({area})-MIN({area}))/{histogram.bins})"
    values = f"${counted}${FIRST_ROW}:${counted}${last}"
    for at in range(histogram.bins):
        row = FIRST_ROW + at
        points[f"{low}{row}"] = f"=IF(COUNT({area})>1,{start}+{at + 0.5}*{width},NA())"
        # the largest value belongs to the last bin
        end = (
            f"<={start}+{at + 1}*{width}*1.000000001"
            if at + 1 == histogram.bins
            else (f"<{start}+{at + 1}*{width}")
        )
        inside = f"({values}>={start}+{at}*{width})*({values}{end})"
        points[f"{number}{row}"] = f"=IF(COUNT({area})>1,SUMPRODUCT({inside}),NA())"
        points[f"{low}{row}"].number_format = (
            column.format.partition(";")[0].removeprefix("+") or "General"
        )
    drawn = BarChart()
    drawn.type, drawn.style, drawn.gapWidth = "col", 2, 4
    drawn.title = histogram.title
    drawn.width, drawn.height = 24, 11.5
    drawn.visible_cells_only = False
    drawn.x_axis.title, drawn.y_axis.title = column.header, "Number"
    drawn.x_axis.delete = drawn.y_axis.delete = False
    drawn.x_axis.tickLblPos = "low"
    drawn.y_axis.number_format = "0"
    drawn.legend = None
    bottom = FIRST_ROW + histogram.bins - 1
    counts = Reference(points, min_col=place + 3, min_row=FIRST_ROW, max_row=bottom)
    series = Series(counts, title=column.label)
    series.graphicalProperties = GraphicalProperties(solidFill=TYPE_HERE)
    drawn.series.append(series)
    drawn.set_categories(Reference(points, min_col=place + 2, min_row=FIRST_ROW, max_row=bottom))
    drawn.layout = Layout(manualLayout=ManualLayout(x=0.09, y=0.12, w=0.87, h=0.68))
    return drawn


def _drawn(table: Table) -> list[tuple[str, str]]:
    """Return what is drawn and in which unit: all on one axis in that of its first column."""
    pairs = [
        (key, table.columns[chart.y[0] if key in chart.y else key].unit)
        for chart in table.sheet.charts
        for key in (chart.x, *chart.y)
    ]
    return list(dict.fromkeys(pairs))


def _chart(table: Table, chart: Chart, points: Worksheet, rows: int) -> ScatterChart:
    drawn_columns = _drawn(table)
    last = FIRST_ROW - 1 + rows
    drawn = ScatterChart()
    drawn.style = 2
    drawn.scatterStyle = "lineMarker"
    drawn.title = chart.title
    drawn.width, drawn.height = 24, 11.5
    drawn.visible_cells_only = False  # what is drawn stands on a hidden sheet
    drawn.display_blanks = "gap"
    drawn.x_axis.title = table.columns[chart.x].header
    first = table.columns[chart.y[0]]
    label = chart.y_label or first.label
    drawn.y_axis.title = f"{label} [{first.unit}]" if first.unit else label
    drawn.x_axis.delete = drawn.y_axis.delete = False
    drawn.x_axis.number_format = drawn.y_axis.number_format = "General"
    drawn.x_axis.tickLblPos = drawn.y_axis.tickLblPos = "low"
    drawn.x_axis.majorGridlines = None
    drawn.legend = drawn.legend if len(chart.y) > 1 else None
    if drawn.legend is not None:
        drawn.legend.position = "b"

    def column(key: str, unit: str) -> Reference:
        place = drawn_columns.index((key, unit)) + 1
        return Reference(points, min_col=place, min_row=FIRST_ROW, max_row=last)

    x = column(chart.x, table.columns[chart.x].unit)
    for key, (shape, colour) in zip(chart.y, cycle(MARKERS), strict=False):
        y = column(key, first.unit)
        series = Series(y, x, title=table.columns[key].label)
        series.marker.symbol, series.marker.size = shape, 7
        series.marker.graphicalProperties = GraphicalProperties(solidFill=colour)
        series.marker.graphicalProperties.line.solidFill = colour
        series.graphicalProperties = GraphicalProperties()
        series.graphicalProperties.line.noFill = True
        drawn.series.append(series)
    drawn.layout = Layout(manualLayout=ManualLayout(x=0.09, y=0.12, w=0.87, h=0.68))
    return drawn
