"""Times and angles read by plain formulas, in pieces that stand in hidden helper columns.

The functions return {piece: formula} in the order in which the pieces need one another; the last
is the result (of a moment: the last two). Each formula refers to the input cell and to earlier
pieces of its row, so that the same set of columns goes down a sheet.

What the formulas read they read as `physics.times` and `physics.angles` do; a spelling that they do
not know is #VALUE!, never another number. An empty cell is #N/A, the contract's word for a missing
input. No piece leaves a text to the sheet's own idea of numbers or dates: a decimal point would be
a matter of locale. Digits alone go through VALUE, and only if TEXT gives them back as they were;
decimals are taken as whole numbers of 12 digits each.
"""

from collections.abc import Callable, Iterable, Mapping

from cellfuncs.physics import times

PLACES = 24
"""Decimals that are read; more are an error"""

NO_BREAK = "\u00a0"

# what stands for a mark, the longer ones first; the letter S in capitals may be South
_MARKS = (
    *(("''", "s"), ("′′", "s"), ("’’", "s"), ('"', "s"), ("″", "s"), ("”", "s"), ("ˢ", "s")),
    *(("'", "m"), ("′", "m"), ("’", "m"), ("ᵐ", "m"), ("M", "m")),
    *(("°", "d"), ("º", "d"), ("ᵈ", "d"), ("D", "d"), ("ʰ", "h"), ("H", "h")),
    *(("−", "-"), ("–", "-"), (NO_BREAK, " ")),
)
_BLANKS = (
    *((" :", ":"), (": ", ":"), ("- ", "-"), ("+ ", "+"), (" s", "s")),
    *((" h", "h"), ("h ", "h"), (" d", "d"), ("d ", "d"), (" m", "m"), ("m ", "m")),
    (" ", ":"),
)
_MARKED = ("1h", "1d", "2h", "2d", "2hm", "2dm", "3h:", "3d:", "3hm", "3dm", "3hms", "3dms")
"""How many fields with which marks between and after them say their unit themselves"""
_UNMARKED = ("2:", "3::")
_BARE = "1"


def moment(
    cell: str,
    piece: Callable[[str], str],
    day_lengths: Mapping[float, float] | None = None,
) -> dict[str, str]:
    """Return the formulas that read a moment as `utc_day` and `utc_fraction`.

    They are the two parts of `physics.times.utc_parts`. Read are: a spreadsheet's date-time in the
    workbook's own date system, a Julian date above 1 000 000, and the text YYYY-MM-DD, after T or a
    blank hh:mm, hh:mm:ss or hh:mm:ss.fff, after that Z, UTC or ±hh:mm.

    cell: reference of the input cell.
    piece: gives the reference of another piece of the same row.
    day_lengths: the days whose length is not 86 400 s that may occur, left out: all that ERFA's
        table has. In a workbook for dates without leap seconds an empty mapping saves 0.5 kB a row.
    """
    text, date, zone, rest, clock, decimals = map(
        piece,
        ("utc_text", "utc_date", "utc_zone", "utc_rest", "utc_clock", "utc_decimals"),
    )
    offset, time, minutes, calendar, unchecked, day, length, passed = map(
        piece,
        (
            *("utc_offset", "utc_time", "utc_minutes", "utc_calendar", "utc_unchecked"),
            *("utc_day", "utc_length", "utc_passed"),
        ),
    )
    month, day_of_month = f"MOD(INT({date}/100),100)", f"MOD({date},100)"
    minute, second = f"MOD(INT({time}/100),100)", f"MOD({time},100)"
    from_2000 = "DATE(2000,1,1)+2451544.5"
    first, end = times.FIRST_DAY, times.END_DAY
    return {
        "utc_text": f'=IF(ISNUMBER({cell}),"",TRIM({_replaced(cell, [(NO_BREAK, " ")])}))',
        "utc_date": f'=IF(AND(MID({text},5,1)="-",MID({text},8,1)="-"),'
        + _digits(f"LEFT({text},4)&MID({text},6,2)&MID({text},9,2)", 8)
        + ",#VALUE!)",
        # how many characters of the text are the zone
        "utc_zone": f'=IF(RIGHT({text},1)="Z",1,IF(RIGHT({text},3)="UTC",3,'
        f'IF(AND(LEN({text})>=22,ISNUMBER(FIND(LEFT(RIGHT({text},6),1),"+-−"))),6,0)))',
        "utc_offset": f'=IF({zone}<6,0,IF(MID({text},LEN({text})-2,1)=":",'
        + _digits(f"MID({text},LEN({text})-4,2)&RIGHT({text},2)", 4)
        + ",#VALUE!))",
        # the letter before keeps TRIM from taking the blank between date and time
        "utc_rest": f'=TRIM("x"&MID({text},11,LEN({text})-10-{zone}))',
        "utc_clock": f'=IF({rest}="x","00:00:00",IF(OR(LEFT({rest},2)="xT",LEFT({rest},2)="x "),'
        f'MID({rest},3,99)&IF(LEN({rest})=7,":00",""),#VALUE!))',
        "utc_time": f'=IF(AND(MID({clock},3,1)=":",MID({clock},6,1)=":"),'
        + _digits(f"LEFT({clock},2)&MID({clock},4,2)&MID({clock},7,2)", 6)
        + ",#VALUE!)",
        "utc_decimals": f"=IF(LEN({clock})=8,0,IF(AND(LEN({clock})>9,"
        f'LEN({clock})<={9 + PLACES},OR(MID({clock},9,1)=".",MID({clock},9,1)=",")),'
        f"{_decimals(clock, '10', '22')},#VALUE!))",
        "utc_minutes": f"=IF(OR({minute}>59,{second}>60,{time}>240000,"
        f"AND({time}=240000,{decimals}>0),MOD({offset},100)>59,"
        f'{offset}>IF(LEFT(RIGHT({text},6),1)="+",1400,1200)),#VALUE!,'
        f'INT({time}/10000)*60+{minute}+IF(LEFT(RIGHT({text},6),1)="+",-1,1)'
        f"*(INT({offset}/100)*60+MOD({offset},100)))",
        "utc_calendar": f"=IF(OR({date}<19590000,{date}>21010000),#NUM!,"
        f"DATE(INT({date}/10000),{month},{day_of_month}))",
        "utc_unchecked": f'=IF(TRIM({cell})="",NA(),IF(ISLOGICAL({cell}),#VALUE!,'
        f"IF(ISNUMBER({cell}),"
        f"IF({cell}>1000000,INT({cell}-0.5)+0.5,INT({cell})-{from_2000}),"
        f"IF(AND(MONTH({calendar})={month},DAY({calendar})={day_of_month}),"
        f"{calendar}-{from_2000}+INT({minutes}/1440),#VALUE!))))",
        "utc_length": _length(unchecked, day_lengths),
        "utc_passed": f"=IF(ISNUMBER({cell}),0,MOD({minutes},1440)*60+{second}+{decimals})",
        "utc_day": f"=IF(OR({unchecked}<{first},{unchecked}>={end}),#NUM!,{unchecked})",
        "utc_fraction": f"=IF(NOT(ISNUMBER({day})),{day},IF(ISNUMBER({cell}),"
        f"IF({cell}>1000000,{cell}-{day},({cell}-INT({cell}))*86400/{length}),"
        f"IF(OR({passed}>{length},AND({second}=60,OR({passed}>={length},"
        f"MOD({minutes},1440)<1439))),#VALUE!,{passed}/{length})))",
    }


def angle(cell: str, piece: Callable[[str], str], as_hours: bool) -> dict[str, str]:
    """Return the formulas that read an angle as `degrees`, as `physics.angles.degrees` does.

    Read are numbers (in degrees; with `as_hours` they are #VALUE!, as there) and texts in one to
    three fields with blanks, colons or marks between them, the last with a decimal point or comma.
    Not read are the letters N, S, E, W at the end, the words deg, min and sec, and a mark before
    the decimals (56ˢ.7).

    cell: reference of the input cell.
    piece: gives the reference of another piece of the same row.
    """
    compact, body, split, end1, end2, end3, count = map(
        piece, ("compact", "body", "split", "end1", "end2", "end3", "count")
    )
    unit, whole, minutes, last, point, tail, size = map(
        piece, ("unit", "whole", "minutes", "last", "point", "tail", "size")
    )
    known = _MARKED + _UNMARKED + (() if as_hours else (_BARE,))
    kind = f"{count}&MID({body},{end1},1)&MID({body},{end2},1)&MID({body},{end3},1)"
    first = f"LEFT({split},{end1}-1)"
    second = f"MID({split},{end1}+1,{end2}-{end1}-1)"
    third = f"MID({split},{end2}+1,{end3}-{end2}-1)"
    negative = f'LEFT({compact},1)="-"'
    number = "#VALUE!" if as_hours else f"IF(ABS({cell})<=360,{cell},#NUM!)"
    return {
        "compact": "=" + _replaced(f"TRIM({_replaced(cell, _MARKS)})", _BLANKS),
        "body": f'=IF(OR({negative},LEFT({compact},1)="+"),MID({compact},2,99),{compact})',
        "split": "=" + _replaced(body, [(mark, ":") for mark in "hdms"]) + '&":::"',
        "end1": f'=FIND(":",{split})',
        "end2": f'=FIND(":",{split},{end1}+1)',
        "end3": f'=FIND(":",{split},{end2}+1)',
        "count": f"=IF({end3}-{end2}>1,3,IF({end2}-{end1}>1,2,1))",
        # degrees in one of the unit that the first field is in
        "unit": f'=IF(AND(LEN({body})<={end3},ISNUMBER(FIND(";"&{kind}&";",";{";".join(known)};"'
        f'))),IF(MID({body},{end1},1)="h",15,IF(MID({body},{end1},1)="d",1,'
        f"{15 if as_hours else 1})),#VALUE!)",
        "whole": f"=IF({count}>1,{_digits(first)},0)",
        "minutes": f"=IF({count}=3,{_digits(second)},0)",
        "last": f'=SUBSTITUTE(IF({count}=3,{third},IF({count}=2,{second},{first})),",",".")',
        "point": f'=FIND(".",{last}&".")',
        "tail": f"=IF(LEN({last})-{point}>{PLACES},#VALUE!,"
        f"{_digits(f'LEFT({last},{point}-1)')}+{_decimals(last, f'{point}+1', f'{point}+13')})",
        "size": f"=IF({count}=1,{tail},IF(OR({minutes}>=60,{tail}>=60),#VALUE!,IF({count}=2,"
        f"({whole}*60+{tail})/60,({whole}*3600+{minutes}*60+{tail})/3600)))",
        "degrees": f'=IF(TRIM({cell})="",NA(),IF(ISLOGICAL({cell}),#VALUE!,'
        f"IF(ISNUMBER({cell}),{number},IF({unit}=15,"
        f"IF(OR({negative},{size}>=24),#NUM!,{size}*15),"
        f"IF({size}>360,#NUM!,IF({negative},-{size},{size}))))))",
    }


def _replaced(text: str, pairs: Iterable[tuple[str, str]]) -> str:
    for old, new in pairs:
        quoted = old.replace('"', '""')
        text = f'SUBSTITUTE({text},"{quoted}","{new}")'
    return text


def _digits(text: str, places: int | None = None) -> str:
    """Return the number that a text of digits only is, and of so many where that is told."""
    pattern = f'"{"0" * places}"' if places else f'REPT("0",LEN({text}))'
    return f"IF(TEXT(VALUE({text}),{pattern})={text},VALUE({text}),#VALUE!)"


def _decimals(text: str, start: str, middle: str) -> str:
    """Return the fraction whose digits begin at `start`; `middle` is 12 places on."""
    # one more, since a text without decimals has not even the point before them
    zeros = "0" * (PLACES + 1)
    upper, lower = (_digits(f'MID({text}&"{zeros}",{place},12)', 12) for place in (start, middle))
    return f"({upper}+{lower}/1E12)/1E12"


def _length(day: str, lengths: Mapping[float, float] | None) -> str:
    known = times.day_lengths() if lengths is None else lengths
    if not known:
        return f"={times.DAY_SECONDS:.0f}"
    days = ",".join(f"{each}" for each in known)
    longer = ",".join(f"{length - times.DAY_SECONDS:.9g}" for length in known.values())
    return f"={times.DAY_SECONDS:.0f}+IFERROR(INDEX({{{longer}}},MATCH({day},{{{days}}},0)),0)"
