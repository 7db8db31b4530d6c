"""Errors a user can meet, each with the exit status its job ends with.

A message is one line: what is wrong, where, what was expected, what was found, what to do.
"""


class SparkrankError(Exception):
    """Base of every error this program raises on purpose."""

    exit_status = 1


class ConfigError(SparkrankError):
    """An argument or a configuration value that cannot be used."""

    exit_status = 2


class InputRefused(SparkrankError):
    """Input data that is missing, unreadable or not what the contract asks for."""

    exit_status = 3


class NotConverged(SparkrankError):
    """The solve did not reach its tolerance within the allowed steps."""

    exit_status = 4


class RunConflict(SparkrankError):
    """The run exists with other inputs, or another process holds it."""

    exit_status = 5


class RunHeld(SparkrankError):
    """A gate holds the run back until a person releases it."""

    exit_status = 6
