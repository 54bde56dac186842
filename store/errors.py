"""What can go wrong with a book, one class a kind; the message is one sentence for the user."""


class BookError(Exception):
    """The command failed and the book is unchanged."""

    exit_code = 1


class BookLocked(BookError):
    """Another writer holds the book."""

    exit_code = 75


class UsageError(BookError):
    """The request itself was wrong: an option, a name, a moment."""

    exit_code = 2


class PlanError(UsageError):
    """The plan file has mistakes; all of them are named."""


class IntakeError(BookError):
    """A source could not be taken in at all; single bad rows are refused rows instead."""


class DifferenceFound(BookError):
    """`verify` or `reproduce` found a difference."""

    exit_code = 4
