"""What the user can repair: errors that name the place, the key, what was found and what is allowed."""

from __future__ import annotations

from collections.abc import Iterable


class InputError(ValueError):
    """Something the user can repair. The command line prints it and ends with status 2.

    Args:
        key: the name of what is wrong (a key of a file, an option, a column).
        found: what was found.
        allowed: what is allowed instead, in words.
        where: the place, as ``campaign.toml:31: ``; empty until a reader knows it.
    """

    def __init__(self, key: str, found: object, allowed: str, where: str = "") -> None:
        super().__init__(key, found, allowed, where)  # plain arguments, so it survives a process pool
        self.key, self.found, self.allowed, self.where = key, found, allowed, where

    def __str__(self) -> str:
        shown = repr(self.found)
        if len(shown) > 200:
            shown = shown[:197] + "..."
        return f"{self.where}{self.key}: found {shown}; allowed: {self.allowed}"

    def at(self, where: str) -> InputError:
        """The same error at a place, unless it has one already."""
        return self if self.where else InputError(self.key, self.found, self.allowed, where)


class InputErrors(InputError):
    """Several errors of one file, reported together, one a line."""

    def __init__(self, errors: Iterable[InputError]) -> None:
        self.errors = tuple(errors)
        first = self.errors[0]
        super().__init__(first.key, first.found, first.allowed, first.where)
        self.args = (self.errors,)

    def __str__(self) -> str:
        return "\n".join(str(error) for error in self.errors)


def raise_all(errors: list[InputError]) -> None:
    """Raise the errors of a file together; nothing happens where there are none."""
    if len(errors) == 1:
        raise errors[0]
    if errors:
        raise InputErrors(errors)


def suggest(name: str, names: Iterable[str]) -> str:
    """The names allowed, the likeliest first, for a message about a mistyped one."""
    import difflib

    known = list(names)
    close = difflib.get_close_matches(name, known, n=1)
    listed = ", ".join(known)
    return f"{listed} (did you mean {close[0]!r}?)" if close else listed
