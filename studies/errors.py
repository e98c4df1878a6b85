"""What is said to a person whose input cannot be used: one line, and exit code 2."""

from difflib import get_close_matches


class InputError(ValueError):
    """Bad input. The message is one line: file, key, value, what is allowed, what may have been meant."""


def one_line(text) -> str:
    """Text from outside with every control character shown, not obeyed, and of bounded length."""
    shown = "".join(char if char.isprintable() else f"\\x{ord(char):02x}" for char in str(text))
    return shown if len(shown) <= 120 else shown[:117] + "..."


def nearest(word: str, known) -> str:
    """A clause that names the nearest known word, or all of them when none is near."""
    known = list(known)
    close = get_close_matches(str(word), known, n=1, cutoff=0.6)
    if close:
        return f"did you mean '{close[0]}'?"
    return "known: " + ", ".join(known) if known else "none is known"
