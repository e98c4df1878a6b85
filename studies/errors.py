"""What is said to a person whose input cannot be used: one line, and exit code 2."""

from difflib import get_close_matches


class InputError(ValueError):
    """Bad input. The message is one line: file, key, value, what is allowed, what may have been meant."""


LONGEST = 120


def inert(text) -> str:
    """Text from outside with every control character shown, not obeyed."""
    return "".join(char if char.isprintable() else f"\\x{ord(char):02x}" for char in str(text))


def one_line(text) -> str:
    """Inert text of bounded length; the middle gives way, since a path's end tells files apart."""
    shown = inert(text)
    return shown if len(shown) <= LONGEST else f"{shown[: LONGEST // 2 - 3]}...{shown[-LONGEST // 2 :]}"


def nearest(word: str, known) -> str:
    """A clause that names the nearest known word, or all of them when none is near."""
    known = [one_line(each) for each in known]
    close = get_close_matches(str(word), known, n=1, cutoff=0.6)
    if close:
        return f"did you mean '{close[0]}'?"
    return "known: " + ", ".join(known) if known else "none is known"
