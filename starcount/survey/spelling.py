"""Words for what is allowed, with the nearest name first when one was misspelt."""

import difflib
from collections.abc import Collection, Iterable


def quoted(texts: Iterable[str]) -> list[str]:
    """Each text in quotes, 'no value' for an empty one."""
    return [repr(str(text)) if text else "no value" for text in texts]


def one_of(given: str, known: Collection[str]) -> str:
    """'one of a, b, c', and which of them ``given`` is most like, if any."""
    known = [str(k) for k in known]
    nearest = difflib.get_close_matches(given.lower(), {k.lower(): k for k in known}, n=1)
    hint = "".join(f" (did you mean {k!r}?)" for k in known if k.lower() in nearest)
    return "one of " + ", ".join(known) + hint
