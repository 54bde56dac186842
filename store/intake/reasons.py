"""Why a row is refused: a fixed small set of words, each with its sentence."""

from __future__ import annotations

from enum import StrEnum


class Reason(StrEnum):
    """The word that a refused row carries; `sentence` says what it means and what to do."""

    NOT_UTF8 = "not_utf8"
    BAD_JSON = "bad_json"
    UNFINISHED_QUOTE = "unfinished_quote"
    WRONG_FIELD_COUNT = "wrong_field_count"
    NO_SERIES = "no_series"
    NAME_TOO_LONG = "name_too_long"
    BAD_NAME = "bad_name"
    UNKNOWN_SERIES = "unknown_series"
    NO_TIME = "no_time"
    BAD_TIME = "bad_time"
    AMBIGUOUS_DATE = "ambiguous_date"
    TIME_SKIPPED = "time_skipped"
    TIME_REPEATED = "time_repeated"
    NOT_A_NUMBER = "not_a_number"
    NOT_FINITE = "not_finite"
    NO_VALUE = "no_value"
    SEVERAL_VALUES = "several_values"

    @property
    def sentence(self) -> str:
        """The reason in one sentence for the user."""
        return _SENTENCES[self]


_SENTENCES = {
    Reason.NOT_UTF8: "The line is not UTF-8 text; save the file as UTF-8.",
    Reason.BAD_JSON: "The line is not one JSON object with each key once.",
    Reason.UNFINISHED_QUOTE: (
        "A field begins with a quote that does not end it, or not in a row of the header's width; quote whole fields."
    ),
    Reason.WRONG_FIELD_COUNT: "The line has more or fewer fields than the header.",
    Reason.NO_SERIES: "The name of the series is empty.",
    Reason.NAME_TOO_LONG: "The name of the series has more than 200 characters.",
    Reason.BAD_NAME: "The name of the series holds a control character.",
    Reason.UNKNOWN_SERIES: (
        "The book has no series of this name; the row is taken up once the plan or --add-series makes it known."
    ),
    Reason.NO_TIME: "The time is empty.",
    Reason.BAD_TIME: "The time is none of the accepted forms or no date of the calendar; see --dates.",
    Reason.AMBIGUOUS_DATE: "The date could be read two ways; say --dates day-first, month-first or the form itself.",
    Reason.TIME_SKIPPED: "The local time does not exist: the clock of the zone jumped over it; give it with an offset.",
    Reason.TIME_REPEATED: "The local time exists twice: the clock of the zone was set back; give it with an offset.",
    Reason.NOT_A_NUMBER: "A value, price or volume is not a plain decimal number; see --decimal and --blank.",
    Reason.NOT_FINITE: "A value, price or volume is infinite, too large or not a number by its own word.",
    Reason.NO_VALUE: "The value is empty and there is no observation at this time that it could withdraw.",
    Reason.SEVERAL_VALUES: (
        "The intake gives several values for this time; correct the file or set the series' same_time."
    ),
}
