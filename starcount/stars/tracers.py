"""Kinds of stars for which there is no sourced function or colour here: asked for by name, they are refused by name."""

from starcount.errors import InputError

TRACERS_ABSENT = {
    "RR Lyrae": "their share of the horizontal branch and their colours over a pulsation have no table here",
    "blue stragglers": "no source gives their number per star of the window",
    "carbon giants": "no source gives their number and their colours, which molecular bands set",
    "L and T dwarfs": "the dwarf functions end at M_V 20.5, late M dwarfs; the census leaves brown dwarfs out",
    "blue horizontal branch": "the tracks lose no mass on the giant branch and the branch ends at 7200 K",
}
"""Names of kinds of stars and why they are absent."""


def require_not_absent(name: str) -> None:
    """Refuse a kind of stars that is known but absent, with the reason."""
    for absent, reason in TRACERS_ABSENT.items():
        if name.casefold() == absent.casefold():
            raise InputError(f"{absent}: not in these populations; {reason}")
