"""A naive reading of delimited text: one row at a time in plain Python, the referee for the set-based intake.

It shares no code with the intake: quotes by walking over characters, local times by trying every offset of the zone,
numbers by their characters, settlement by keeping lists.
"""

from __future__ import annotations

import json
from collections import Counter
from dataclasses import dataclass, field
from datetime import UTC, datetime, timedelta
from functools import cache
from statistics import median
from tempfile import TemporaryDirectory
from zoneinfo import ZoneInfo

import duckdb

from driftbook.store import migrate

SPACE = " \t\r\n\v\f"
NUMBERS = ("value", "open", "high", "low", "volume")
AFTER_ONE_LINE = 100  # the most lines of one row


@cache
def _template():
    folder = TemporaryDirectory()
    with duckdb.connect(f"{folder.name}/empty.duckdb") as con:
        migrate.apply_pending(con)
    return folder


def empty_book() -> duckdb.DuckDBPyConnection:
    """An empty book in memory, copied: migrating anew would take most of a test's time."""
    con = duckdb.connect()
    con.execute(f"attach '{_template().name}/empty.duckdb' as template (read_only)")
    con.execute("copy from database template to memory")
    con.execute("detach template")
    return con


@dataclass
class NaiveOptions:
    """How a delivery is read."""

    zone: str | None = None
    dates: str | None = None
    layout: str = "long"
    decimal: str = "."
    blank: tuple[str, ...] = ()


@dataclass
class NaiveBook:
    """What the book should hold: observations and refused rows as dicts, in the order in which they were made."""

    zones: dict[str, str] = field(default_factory=dict)
    same_time: dict[str, str] = field(default_factory=dict)
    observations: list[dict] = field(default_factory=list)
    refused: list[dict] = field(default_factory=list)
    intakes: list[dict] = field(default_factory=list)

    def add(self, name, zone="UTC", same_time="refuse"):
        self.zones[name] = zone
        self.same_time[name] = same_time

    def take_in(self, data: bytes, run: int, *, add_series=False, **options):
        told = NaiveOptions(**options)
        intake = len(self.intakes) + 1
        rows = list(read_rows(data, told))
        if add_series:
            new = []
            for row in rows:
                name = (row.get("fields") or {}).get("series")
                if name and name not in self.zones and name not in new and name_fault(name) is None:
                    new.append(name)
            for name in new:
                self.add(name)
            self.take_up(new, run)
        counts = self._bring_in(rows, intake, run, told)
        self.intakes.append({"read": len(rows), **counts, "told": told})

    def take_up(self, names, run):
        taken = 0
        for number, intake in enumerate(self.intakes, start=1):
            waiting = [
                row
                for row in self.refused
                if row["intake"] == number
                and row["reason"] == "unknown_series"
                and row["run_to"] is None
                and row["name"] in names
            ]
            rows = [
                {
                    "line": row["line"],
                    "cell": row["cell"],
                    "text": row["text"],
                    "fields": {"series": row["name"], **row["said"]},
                }
                for row in sorted(waiting, key=lambda row: (row["line"], row["cell"]))
            ]
            for row in waiting:
                row["run_to"] = run
            counts = self._bring_in(rows, number, run, intake["told"])
            taken += len(rows) - counts["refused"]
        return taken

    def _bring_in(self, rows, intake, run, told):
        groups: dict[tuple, list] = {}
        before = len(self.refused)
        for row in rows:
            reason, said = row.get("reason"), None
            if reason is None:
                reason, said = self._judge(row["fields"], told)
            if reason is None:
                groups.setdefault((row["fields"]["series"], said["at"]), []).append((row, said["numbers"]))
            else:
                self._refuse(row, reason, intake, run)
        outcomes: Counter = Counter()
        for (name, at), arrived in groups.items():
            self._settle(name, at, arrived, intake, run, outcomes)
        return {
            "new": outcomes["new"],
            "revised": outcomes["revised"],
            "same": outcomes["same"],
            "refused": len(self.refused) - before,
        }

    def _judge(self, fields, told):
        name = fields["series"]
        if not name:
            return "no_series", None
        if name not in self.zones:
            return name_fault(name) or "unknown_series", None
        if not fields["time"]:
            return "no_time", None
        at = read_time(fields["time"], told.zone or self.zones[name], told.dates)
        if isinstance(at, str):
            return at, None
        numbers = []
        for role in NUMBERS:
            number = read_number(fields[role], told.decimal) if fields[role] else None
            if isinstance(number, str):
                return number, None
            numbers.append(number)
        return None, {"at": at, "numbers": None if numbers[0] is None else tuple(numbers)}

    def _refuse(self, row, reason, intake, run):
        waits = reason == "unknown_series"
        said = {role: row["fields"][role] for role in ("time", *NUMBERS)} if waits else None
        self.refused.append(
            {
                "intake": intake,
                "line": row["line"],
                "cell": row["cell"],
                "text": row["text"],
                "reason": reason,
                "name": row["fields"]["series"] if waits else None,
                "said": said,
                "run_from": run,
                "run_to": None,
            }
        )

    def _settle(self, name, at, told, intake, run, outcomes):
        values = [numbers for _, numbers in told]
        rule = self.same_time[name]
        if rule == "refuse" and len(set(values)) > 1:
            for row, _ in told:
                self._refuse(row, "several_values", intake, run)
            return
        given = [numbers for numbers in values if numbers is not None]
        if rule == "median" and len(set(given)) > 1:
            middle = tuple(
                median([column for column in columns if column is not None]) if any_given(columns) else None
                for columns in zip(*given, strict=True)
            )
            self._say(name, at, middle, told[0][0], intake, run, outcomes)
            outcomes["same"] += len(told) - 1
            return
        for row, numbers in told:
            self._say(name, at, numbers, row, intake, run, outcomes)

    def _say(self, name, at, numbers, row, intake, run, outcomes):
        past = [version for version in self.observations if (version["series"], version["at"]) == (name, at)]
        standing = [version for version in past if version["run_to"] is None]
        if numbers is None and not past:
            self._refuse(row, "no_value", intake, run)
            return
        if (standing[0]["numbers"] if standing else None) == numbers:
            outcomes["same"] += 1
            return
        outcomes["revised" if past else "new"] += 1
        for version in standing:
            version["run_to"] = run
        if numbers is not None:
            take = sum(version["run_from"] == run for version in past)
            self.observations.append(
                {
                    "series": name,
                    "at": at,
                    "numbers": numbers,
                    "intake": intake,
                    "take": take,
                    "run_from": run,
                    "run_to": None,
                }
            )


def any_given(columns):
    return any(column is not None for column in columns)


def name_fault(name):
    if len(name) > 200:
        return "name_too_long"
    return "bad_name" if any(ord(letter) < 32 or 127 <= ord(letter) < 160 for letter in name) else None


def read_rows(data: bytes, told: NaiveOptions):
    """The rows after the header as {line, cell, text, fields} or {line, cell, text, reason}."""
    lines = physical_lines(data)
    header_at, delimiter, header = read_header(lines)
    skipped = 0
    for at in range(header_at + 1, len(lines)):
        if skipped:
            skipped -= 1
            continue
        text, is_utf8 = lines[at]
        here = {"line": at + 1, "cell": 0, "text": text.rstrip("\r\n")}
        if not is_utf8:
            yield {**here, "reason": "not_utf8"}
            continue
        if not text.strip(SPACE):
            continue
        parts = split(text, delimiter)
        if parts == "open" and text.count('"') % 2:
            text, skipped = whole_row(lines[at : at + AFTER_ONE_LINE], delimiter, len(header))
            here["text"] = text.rstrip("\r\n")
            parts = split(text, delimiter)
        if isinstance(parts, str):
            yield {**here, "reason": "unfinished_quote"}
        elif len(parts) != len(header):
            yield {**here, "reason": "wrong_field_count"}
        else:
            yield from cells(header, parts, here, told)


def physical_lines(data: bytes):
    """(text with its end, whether it is UTF-8) of each line."""
    if data[:2] in (b"\xff\xfe", b"\xfe\xff"):
        whole = len(data) - len(data) % 2
        text = data[:whole].decode("utf-16", "surrogatepass")
        data = text.encode("utf-8", "surrogatepass") + (b"\xff" if whole < len(data) else b"")
    found = []
    for raw in data.removeprefix(b"\xef\xbb\xbf").splitlines(keepends=True):
        try:
            found.append((raw.decode(), True))
        except UnicodeDecodeError:
            found.append((raw.decode(errors="backslashreplace"), False))
    return found


def read_header(lines):
    """The place of the header's line, the delimiter and the columns."""
    at = next(at for at, (text, _) in enumerate(lines) if text.strip(SPACE))
    text = lines[at][0]
    delimiter = max(",;\t|", key=text.count)
    return at, delimiter, split(text, delimiter)


def whole_row(lines, delimiter, width):
    """The text of a row whose first line ends inside a quoted field, and how many lines more it takes."""
    text = ""
    for more, (line, is_utf8) in enumerate(lines):
        text += line
        parts = split(text, delimiter)
        if not is_utf8 or parts == "misplaced":
            break
        if parts != "open":
            return (text, more) if len(parts) == width else (lines[0][0], 0)
    return lines[0][0], 0


def cells(header, parts, here, told):
    """One row of a long line, one for each cell of a wide one."""
    if told.layout == "long":
        fields = dict.fromkeys(("series", "time", *NUMBERS)) | dict(zip(header, parts, strict=True))
        for role in NUMBERS:
            if fields[role] in told.blank:
                fields[role] = ""
        yield {**here, "fields": fields}
        return
    time = parts[header.index("time")]
    for cell, (name, said) in enumerate(zip(header, parts, strict=True), start=1):
        if name != "time" and said and said not in told.blank:
            fields = dict.fromkeys(NUMBERS) | {"series": name, "time": time, "value": said}
            text = here["text"] if len(here["text"]) <= 200 else here["text"][:200] + "…"
            yield {**here, "cell": cell, "text": text, "fields": fields}


def split(text, delimiter):
    """The fields of a row by walking over it; `open` where a quote is open at its end, `misplaced` where one ends
    before its field does."""
    fields, field_text, state = [], "", "start"
    for letter in text.strip("\r\n") + delimiter:
        if state == "start" and letter in SPACE and letter != delimiter:
            continue
        if state == "start" and letter == '"':
            state = "quoted"
        elif state == "quoted":
            state, field_text = ("maybe", field_text) if letter == '"' else ("quoted", field_text + letter)
        elif state == "maybe" and letter == '"':
            state, field_text = "quoted", field_text + '"'
        elif letter == delimiter:
            fields.append(field_text.strip(SPACE))
            field_text, state = "", "start"
        elif state in ("maybe", "after"):
            if letter not in SPACE:
                return "misplaced"
            state = "after"
        else:
            state, field_text = "plain", field_text + letter
    return fields if state == "start" else "open"


def read_number(text, decimal="."):
    if decimal == ",":
        text = "not a number" if "." in text else text.replace(",", ".")
    if text.lstrip("+-").lower() in ("inf", "infinity", "nan") and len(text) - len(text.lstrip("+-")) <= 1:
        return "not_finite"
    if not text.isascii() or set(text) - set("0123456789+-.eE"):
        return "not_a_number"
    try:
        number = float(text)
    except ValueError:
        return "not_a_number"
    return "not_finite" if number in (float("inf"), float("-inf")) else number


def read_time(text, zone, dates):
    day, mark, clock = text, "", ""
    for separator in "T ":
        if separator in text:
            day, mark, clock = text.partition(separator)
            break
    date_parts = read_day(day, dates)
    if isinstance(date_parts, str):
        return date_parts
    is_iso = len(day) == 10 and day[4] == "-" == day[7]
    if mark and (len(day) == 8 and day.isdigit()):
        return "bad_time"
    try:
        if not mark:
            return datetime(*date_parts)
        offset = None
        for sign in "Z+-":
            if sign in clock:
                clock, _, digits = clock.partition(sign)
                offset = timedelta(0) if sign == "Z" else read_offset(sign, digits)
                if offset is None or (sign == "Z" and digits):
                    return "bad_time"
        wall = datetime(*date_parts, *read_clock(clock, is_iso))
        return in_zone(wall, zone) if offset is None else wall - offset
    except (ValueError, OverflowError):
        return "bad_time"


def digits_only(text):
    return text.isascii() and text.isdigit()


def read_day(day, dates):
    """(year, month, day), or the reason; the calendar is checked later."""
    if len(day) == 8 and digits_only(day):
        return int(day[:4]), int(day[4:6]), int(day[6:])
    for mark in "-/.":
        parts = day.split(mark)
        if len(parts) != 3 or not all(digits_only(part) for part in parts):
            continue
        lengths = [len(part) for part in parts]
        a, b, c = map(int, parts)
        if lengths[0] == 4 and ((mark == "-" and lengths == [4, 2, 2]) or (mark == "/" and max(lengths[1:]) <= 2)):
            return a, b, c
        if max(lengths[:2]) > 2 or lengths[2] not in (2, 4):
            return "bad_time"
        year = c if lengths[2] == 4 else (1900 + c if c >= 69 else 2000 + c)
        if dates == "day-first":
            return year, b, a
        if dates == "month-first":
            return year, a, b
        if lengths[2] == 2 or (a != b and a <= 12 and b <= 12):
            return "ambiguous_date"
        return (year, b, a) if b <= 12 else (year, a, b)
    return "bad_time"


def read_offset(sign, digits):
    hours, minutes = digits[:2], digits[2:].removeprefix(":") or "00"
    if not (digits_only(hours + minutes) and len(hours) == len(minutes) == 2) or digits.endswith(":"):
        return None
    if int(minutes) > 59 or int(hours) > 15:
        return None
    size = timedelta(hours=int(hours), minutes=int(minutes))
    return -size if sign == "-" else size


def read_clock(clock, is_iso):
    hour, *rest = clock.split(":")
    if not digits_only(hour) or len(hour) > 2 or (is_iso and len(hour) != 2) or not 1 <= len(rest) <= 2:
        raise ValueError(clock)
    minute = rest[0]
    second, point, fraction = rest[1].partition(".") if len(rest) == 2 else ("00", "", "0")
    if point and not fraction:
        raise ValueError(clock)
    if not digits_only(minute + second) or len(minute) != 2 or len(second) != 2 or not digits_only(fraction or "0"):
        raise ValueError(clock)
    return int(hour), int(minute), int(second), int((fraction or "0")[:6].ljust(6, "0"))


def in_zone(wall, zone):
    """Every instant within a day whose clock in the zone shows the wall time."""
    place, near = ZoneInfo(zone), wall.replace(tzinfo=UTC)
    offsets = {(near + timedelta(hours=hours)).astimezone(place).utcoffset() for hours in range(-36, 37)}
    instants = {wall - offset for offset in offsets if (near - offset).astimezone(place).replace(tzinfo=None) == wall}
    if len(instants) == 1:
        return instants.pop()
    return "time_repeated" if instants else "time_skipped"


def as_book_shows(book: NaiveBook):
    """Observations, refused rows and counts in the form in which `of_book` reads them from a real book."""
    observations = [
        (o["series"], o["at"], *o["numbers"], o["intake"], o["take"], o["run_from"], o["run_to"] or 0)
        for o in book.observations
    ]
    keys = ("intake", "run_from", "line", "cell", "text", "reason")
    refused = [
        (*(r[key] for key in keys), r["name"] or "", json.dumps(r["said"]), r["run_to"] or 0) for r in book.refused
    ]
    counts = [tuple(intake[key] for key in ("read", "new", "revised", "same", "refused")) for intake in book.intakes]
    return sorted(observations, key=str), sorted(refused, key=str), counts


def of_book(con):
    """The same of a real book."""
    observations = con.execute(
        "select s.series, observed_at, value, open, high, low, volume, intake_id, take, o.run_from, coalesce(run_to, 0)"
        " from base.observation o join base.series s using (series_id)"
    ).fetchall()
    refused = con.execute(
        "select intake_id, run_from, line, cell, text, reason, coalesce(name, ''), fields, coalesce(run_to, 0)"
        " from base.refused_row"
    ).fetchall()
    counts = con.execute(
        "select rows_read, rows_new, rows_revised, rows_same, rows_refused from base.intake order by intake_id"
    ).fetchall()
    refused = [(*row[:7], json.dumps(json.loads(row[7]) if row[7] else None), row[8]) for row in refused]
    return sorted(observations, key=str), sorted(refused, key=str), counts
