"""Every exception of rbsim.

Each class holds its facts as fields, forms one sentence from them and survives pickling, so that a worker
process can hand it back unharmed. The commands room turns a class into its exit code.
"""

from __future__ import annotations


class RbsimError(Exception):
    """Base of all errors a user can cause or cure.

    Parameters
    ----------
    message : str
        One sentence: what is wrong, with which value, what is allowed, what to do.
    """

    exit_code: int = 1

    def __init__(self, message: str) -> None:
        super().__init__(message)
        self.message = message


class ConfigError(RbsimError):
    """A configuration asks for something that is not allowed.

    Parameters
    ----------
    message : str
        All faults in one text, one line each.
    faults : tuple of str
        The single faults, each naming source, key, value and what is allowed.
    """

    exit_code = 2

    def __init__(self, message: str, faults: tuple[str, ...] = ()) -> None:
        super().__init__(message)
        self.faults = faults or (message,)

    def __reduce__(self) -> tuple[type[ConfigError], tuple[str, tuple[str, ...]]]:
        return type(self), (self.message, self.faults)


class RunFolderError(RbsimError):
    """A run folder or one of its files is missing, damaged, busy or of another format."""

    exit_code = 3


class DivergedError(RbsimError):
    """The simulated state stopped being finite or physical.

    Parameters
    ----------
    message : str
        What happened and what to do.
    time : float
        Free-fall time at which it was noticed.
    step_size : float
        Last time step in free-fall times.
    """

    exit_code = 4

    def __init__(self, message: str, time: float = 0.0, step_size: float = 0.0) -> None:
        super().__init__(message)
        self.time = time
        self.step_size = step_size

    def __reduce__(self) -> tuple[type[DivergedError], tuple[str, float, float]]:
        return type(self), (self.message, self.time, self.step_size)


class InterruptedRunError(RbsimError):
    """A signal stopped a run after its checkpoint was written; it can be resumed."""

    exit_code = 5


class NotConvergedError(RbsimError):
    """An iteration did not converge, or a solution branch ended."""

    exit_code = 6
