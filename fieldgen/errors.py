"""The tree of errors: one base class, so that the command line can print one line and exit 1.

A message reads ``<where>: <name> is <value with unit>, expected <rule>. <next step>.``
"""


class FieldgenError(Exception):
    """Any problem that fieldgen can explain to the person who meets it."""

    exit_status = 1


class SettingsError(FieldgenError):
    """The settings file cannot be used; the message lists every problem in it."""


class InputError(FieldgenError):
    """An input file is missing, or holds nothing that can be used."""


class GridError(FieldgenError):
    """The grid and what it should lie on (terrain, stations) do not fit together."""


class OutputError(FieldgenError):
    """A product cannot be written."""


class BusyError(FieldgenError):
    """Another run is at work in the output folder."""

    exit_status = 3


class ProcessError(FieldgenError):
    """A process that shared the work was killed."""
