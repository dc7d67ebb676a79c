"""The errors a user can meet, all of them one line long.

CarrylabError
    StudyError       the study file: a key, its value and what is allowed
    DataError        a data file: file, row or series, the value and what is allowed
    SampleError      nothing, or too little, is left to estimate from
    InferenceError   a test or an error that this sample cannot support
    ExtraError       an optional package is not installed

Each message says what is wrong, where, the value seen, what is allowed and what to do.
The command line prints the message alone and exits with code 2.
"""


class CarrylabError(Exception):
    """Base of every error that carrylab raises on purpose."""


class StudyError(CarrylabError):
    """The study file holds a key or a value that is not allowed."""


class DataError(CarrylabError):
    """A data file cannot be read as declared."""


class SampleError(CarrylabError):
    """Too few observations are left for what the study asks."""


class InferenceError(CarrylabError):
    """The sample cannot support the test or the standard error asked for."""


class ExtraError(CarrylabError):
    """A feature needs an optional package that is not installed."""
