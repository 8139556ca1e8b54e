"""What can go wrong with a call. What is wrong with a deck is a finding, not an exception.

XcheckError                 anything xcheck raises on purpose; exit status 2
+-- DeckUnreadable          a deck cannot be read at all (missing, a device, no permission, too large)
+-- CallError               the call itself is wrong (an unknown stage, a band upside down)
+-- ProjectError            a project file that cannot be read or says what it may not
+-- OutputError             a report or picture cannot be written
+-- EngineError             ngspice is missing, too old, crashed, hung or said no
+-- SingularCircuit         the linear equations have no unique solution
"""


class XcheckError(Exception):
    """Root of all errors raised on purpose; its text is written for the user."""

    exit_status = 2


class DeckUnreadable(XcheckError):
    """A deck cannot be read at all."""


class CallError(XcheckError):
    """The call is wrong: an option, a name, a range."""


class ProjectError(CallError):
    """A project file is wrong: every fault on a line of its own, with its key."""


class OutputError(XcheckError):
    """A report or picture cannot be written."""


class EngineError(XcheckError):
    """ngspice is missing, too old, crashed, hung or refused; carries its own words."""


class SingularCircuit(XcheckError):
    """The linear equations of a circuit have no unique solution; names the nodes involved."""
