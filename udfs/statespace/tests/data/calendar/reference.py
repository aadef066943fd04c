"""Writes periods.csv, the reference of the calendar arithmetic, and prints the figures of Easter.

    pip install numpy==2.4.6 python-dateutil==4.0.0
    python3 reference.py

It shares no code with the library: ends of periods are python-dateutil's relativedelta, counts of weekdays and
working days numpy's busday_count, lengths of months those of Python's calendar module, Easter python-dateutil's
easter(). The draws are seeded, so a second run writes the same bytes.
"""

import calendar
import collections
import datetime
import pathlib
import random

import numpy
from dateutil.easter import easter
from dateutil.relativedelta import relativedelta

HERE = pathlib.Path(__file__).parent
MASKS = ["".join("1" if day == wanted else "0" for day in range(7)) for wanted in range(7)]


def ends_of_months():
    """The days on which adding months has to stop short, around leap days and centuries."""
    for year in (1899, 1900, 1999, 2000, 2023, 2024, 2025, 2100):
        for month, day in ((1, 28), (1, 29), (1, 30), (1, 31), (2, 28), (8, 31), (10, 31), (12, 31)):
            yield datetime.date(year, month, day)
    for year in (1904, 2000, 2024):
        yield datetime.date(year, 2, 29)


def cases(draw):
    for first in ends_of_months():
        yield first, "months", draw.choice([1, 1, 1, 2, 3, 6, 11, 12, 13, 48])
    span = (datetime.date(2400, 12, 31) - datetime.date(1600, 1, 1)).days
    for _ in range(120):
        first = datetime.date(1600, 1, 1) + datetime.timedelta(draw.randrange(span))
        if draw.random() < 0.5:
            yield first, "months", draw.choice([1, 2, 3, 4, 6, 12, 25, 120])
        else:
            yield first, "days", draw.choice([1, 2, 5, 6, 7, 8, 10, 14, 28, 30, 91, 365, 1000])


def holidays_of(draw, first, end):
    """Up to nine dates in and around the period, some twice, some on weekends."""
    reach = (end - first).days + 20
    dates = [first + datetime.timedelta(draw.randrange(-10, reach - 10)) for _ in range(draw.randrange(8))]
    dates += draw.sample([first, end, end - datetime.timedelta(1)], draw.randrange(3))
    if dates and draw.random() < 0.3:
        dates.append(dates[0])
    draw.shuffle(dates)
    return dates


def periods():
    draw = random.Random(20250707)
    yield "first,unit,length,end,month_length," + ",".join(calendar.day_name).lower() + ",holidays,dates,working_days"
    for first, unit, length in cases(draw):
        end = first + relativedelta(**{unit: length})
        listed = holidays_of(draw, first, end)
        weekdays = [numpy.busday_count(first, end, weekmask=mask) for mask in MASKS]
        working = numpy.busday_count(first, end, holidays=listed)
        dates = len({day for day in listed if first <= day < end})
        month_length = calendar.monthrange(first.year, first.month)[1]
        fields = [first, unit, length, end, month_length, *weekdays, " ".join(map(str, listed)), dates, working]
        yield ",".join(map(str, fields))


def main():
    (HERE / "periods.csv").write_text("\n".join(periods()) + "\n")
    sundays = [easter(year) for year in range(1583, 4100)]
    # FNV-1a, 64 bits, over the texts 1583-04-10, 1584-04-01, ...
    checksum = 0xCBF29CE484222325
    for byte in "".join(map(str, sundays)).encode():
        checksum = (checksum ^ byte) * 0x100000001B3 % 2**64
    counts = collections.Counter((day - datetime.date(day.year, 3, 22)).days for day in sundays)
    print(f"Easter 1583 to 4099: checksum {checksum:#018x}")
    print("years by date, 22 March to 25 April:", [counts[day] for day in range(35)])


if __name__ == "__main__":
    main()
