"""The one exception tree; every error says what was given, what is allowed and what to do."""

__all__ = [
    "CapacityError",
    "ContradictionError",
    "DossierError",
    "FileError",
    "InputError",
    "MissingPartError",
    "SolverkitError",
]

_SHOWN = 60


def _shown(value: object) -> str:
    """Return ``value`` as text short enough for one line."""
    text = value if isinstance(value, str) else repr(value)
    text = text.encode("unicode_escape").decode("ascii") if not text.isprintable() else text
    return text if len(text) <= _SHOWN else f"{text[:_SHOWN]}… ({len(text)} characters)"


class SolverkitError(Exception):
    """Root of the errors that the kit raises on purpose.

    Attributes:
        exit_status: what the command line answers when this error ends it.
    """

    exit_status = 1


class InputError(SolverkitError, ValueError):
    """A value that a person gave is not allowed.

    Attributes:
        field: name of the option, key or argument.
        given: the value as it was given.
        allowed: what may stand there, in words.
    """

    exit_status = 2

    def __init__(self, field: str, given: object, allowed: str) -> None:
        self.field, self.given, self.allowed = field, given, allowed
        super().__init__(f"{field}: got {_shown(given)}; allowed: {allowed}")

    def __reduce__(self) -> tuple[type, tuple[str, object, str]]:
        return (type(self), (self.field, self.given, self.allowed))


class FileError(SolverkitError, OSError):
    """A file can't be read or written.

    Attributes:
        path: the file.
        reason: what is wrong.
    """

    exit_status = 2

    def __init__(self, path: object, reason: str) -> None:
        self.path, self.reason = str(path), reason
        super().__init__(f"{self.path}: {reason}")

    def __str__(self) -> str:
        return f"{self.path}: {self.reason}"

    def __reduce__(self) -> tuple[type, tuple[str, str]]:
        return (type(self), (self.path, self.reason))


class DossierError(FileError):
    """A dossier can't be opened, read or written; ``path`` may be its folder, ``reason`` says what to do."""

    def __str__(self) -> str:
        return f"dossier {self.path}: {self.reason}"


class CapacityError(SolverkitError, OverflowError):
    """A method can't take a cell; the message says which of its limits was met.

    Attributes:
        method: name of the method.
        reason: which limit, and by what value.
    """

    exit_status = 3

    def __init__(self, method: str, reason: str) -> None:
        self.method, self.reason = method, reason
        super().__init__(f"{method}: {reason}")

    def __reduce__(self) -> tuple[type, tuple[str, str]]:
        return (type(self), (self.method, self.reason))


class MissingPartError(SolverkitError, ImportError):
    """A part that is needed isn't installed.

    Attributes:
        part: the missing part.
        remedy: how to get it.
    """

    exit_status = 4

    def __init__(self, part: str, remedy: str) -> None:
        self.part, self.remedy = part, remedy
        super().__init__(f"{part} is missing; {remedy}")

    def __reduce__(self) -> tuple[type, tuple[str, str]]:
        return (type(self), (self.part, self.remedy))


class ContradictionError(SolverkitError, RuntimeError):
    """Two methods, or a method and direct iteration, disagree about the same cell."""

    exit_status = 5
