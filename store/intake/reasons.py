"""Why a row is refused: a fixed small set of words, each with its sentence."""

from __future__ import annotations

from enum import StrEnum


class Reason(StrEnum):
    """The word that a refused row carries; `sentence` says what it means and what to do."""

    sentence: str

    def __new__(cls, word: str, sentence: str) -> Reason:
        """Ties the sentence to the word."""
        member = str.__new__(cls, word)
        member._value_ = word
        member.sentence = sentence
        return member

    NOT_UTF8 = "not_utf8", "The line is not UTF-8 text; save the file as UTF-8."
    UNFINISHED_QUOTE = (
        "unfinished_quote",
        "A field begins with a quote that does not end the field on the same line; quote the whole field.",
    )
    WRONG_FIELD_COUNT = "wrong_field_count", "The line has more or fewer fields than the header."
    NO_SERIES = "no_series", "The name of the series is empty."
    NAME_TOO_LONG = "name_too_long", "The name of the series has more than 200 characters."
    BAD_NAME = "bad_name", "The name of the series holds a control character."
    UNKNOWN_SERIES = (
        "unknown_series",
        "The book has no series of this name; the row is taken up once the plan or --add-series makes it known.",
    )
    NO_TIME = "no_time", "The time is empty."
    BAD_TIME = "bad_time", "The time is none of the accepted forms or no date of the calendar; see --dates."
    AMBIGUOUS_DATE = (
        "ambiguous_date",
        "The date could be read two ways; say --dates day-first, month-first or the form itself.",
    )
    TIME_SKIPPED = (
        "time_skipped",
        "The local time does not exist: the clock of the zone jumped over it; give it with an offset.",
    )
    TIME_REPEATED = (
        "time_repeated",
        "The local time exists twice: the clock of the zone was set back; give it with an offset.",
    )
    NOT_A_NUMBER = "not_a_number", "A value, price or volume is not a plain decimal number."
    NOT_FINITE = "not_finite", "A value, price or volume is infinite, too large or not a number by its own word."
    NO_VALUE = "no_value", "The value is empty and there is no observation at this time that it could withdraw."
    SEVERAL_VALUES = (
        "several_values",
        "The intake gives several values for this time; correct the file or set the series' same_time.",
    )
