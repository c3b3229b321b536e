"""What can go wrong, in one voice: where, what was found, what is allowed, what to try.

The core raises these plain exceptions; only the command line turns them into text and an exit status.
"""

from __future__ import annotations


class RealizeError(ValueError):
    """The input cannot be understood.

    Parameters
    ----------
    where : str
        The place the user would look at first: file, table and key, or the column of an expression.
    found : str
        What stands there.
    allowed : str
        What may stand there.
    advice : str
        What to try next.
    excerpt : str
        Lines quoted from the input (an expression with a caret below it); may be empty.

    Examples
    --------
    >>> import realize
    >>> try:
    ...     realize.TransferFunction.parse("4.2 + 18/t")
    ... except realize.RealizeError as error:
    ...     print(error.found)
    the unknown name "t"
    """

    exit_status = 2

    def __init__(self, where: str, found: str, allowed: str, advice: str, excerpt: str = "") -> None:
        super().__init__(where, found, allowed, advice, excerpt)
        self.where = where
        self.found = found
        self.allowed = allowed
        self.advice = advice
        self.excerpt = excerpt

    def __str__(self) -> str:
        lines = [f"{self.where}: {self.found}"]
        lines += [f"  {line}" for line in self.excerpt.splitlines()]
        lines += [f"  allowed: {self.allowed}"] if self.allowed else []
        lines += [f"  try: {self.advice}"] if self.advice else []
        return "\n".join(lines)


class Refused(RealizeError):
    """The input is understood, and the answer is no: improper, unstable, out of tolerance.

    Examples
    --------
    >>> import realize
    >>> try:
    ...     realize.emit("4.2 + 18/s + 0.09*s", rate="2 kHz")
    ... except realize.Refused as refusal:
    ...     print(refusal.where, "-", refusal.allowed)
    transfer - as many poles as zeros, or more
    """

    exit_status = 1


def internal(error: Exception) -> RealizeError:
    """Put a mistake of our own, which no input should be able to cause, into words."""
    found = f"an error of realize itself, {type(error).__name__}: {error}"
    return RealizeError("internal", found, "", "report it together with the design file")
