"""The errors a user can meet: each says where, what was found, what is allowed, what to do.

A `ConetoneError` is a message, not a traceback: the command line prints it and exits with `exit_code`,
2 for bad input or usage, 1 for something that failed on the way.
"""


class ConetoneError(Exception):
    """Anything that conetone explains to a person instead of showing a traceback."""

    exit_code = 1


class InputError(ConetoneError):
    """A value from outside that cannot be used.

    Attributes: `place` (for instance `ensembles[1].dimension`), `found`, `allowed`, `advice`.
    """

    exit_code = 2

    def __init__(self, place: str, found: str, allowed: str, advice: str = "") -> None:
        self.place, self.found, self.allowed, self.advice = place, found, allowed, advice
        message = f"{place}: found {found}; allowed: {allowed}"
        super().__init__(f"{message}; {advice}" if advice else message)


class SweepError(InputError):
    """A sweep file that does not say one clear thing."""


class UsageError(InputError):
    """A command line that asks for something that cannot be."""


class RequestError(InputError):
    """A job request (JSON) with an unknown, missing or impossible field."""


class TableError(InputError):
    """A table that does not match its schema, or a file that is no intact table."""


class OrderError(InputError):
    """A relation that is no naturally labelled partial order."""


class MatrixError(InputError):
    """A matrix that has no spectrum: not square, not finite."""


class LiveRunError(ConetoneError):
    """Another run of the same sweep is alive."""

    exit_code = 2


class RunFailedError(ConetoneError):
    """The workflow ended before everything was computed."""


class InterruptedRunError(ConetoneError):
    """A person or a scheduler stopped the work; what was finished is kept."""
