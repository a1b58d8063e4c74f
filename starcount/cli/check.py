"""``starcount check``."""

from pathlib import Path

import click

from starcount.cli import screen


@click.command()
@click.argument("survey", type=Path)
@screen.json_option
def check(survey: Path, as_json: bool) -> None:
    """Say everything that is wrong with a survey's files, at once.

    SURVEY is a folder with a survey.toml, or that file. Nothing is written.
    """
    from starcount import steps

    record = steps.check(survey)
    screen.show(record, _lines(record), as_json)


_MOST_PAIRS = 10


def _colour(colour: dict | None) -> str:
    """Such as ``BP-RP, 12 from 0.4 to all redder``."""
    if colour is None:
        return "-"
    low, high = colour["c_lo_mag"], colour["c_hi_mag"]
    ends = "all bluer" if low is None else f"{low:g}", "all redder" if high is None else f"{high:g}"
    return f"{'-'.join(colour['bands'])}, {colour['bins']} from {' to '.join(ends)}"


def _lines(record: dict) -> list[str]:
    head = ["group", "band", "fields", "area [deg2]", "bins", "from", "to [mag]", "colour", "stars"]
    rows = [
        [
            group["name"],
            group["band"],
            str(group["fields"]),
            f"{group['area_deg2']:.2f}",
            str(group["bins"]),
            f"{group['m_lo_mag']:g}",
            f"{group['m_hi_mag']:g}",
            _colour(group["colour"]),
            "not counted" if group["stars"] is None else str(group["stars"]),
        ]
        for group in record["groups"]
    ]
    invented = " (invented)" if record["invented"] else ""
    pairs = [
        f"note: {first} and {second} overlap in the same bins; a fit refuses them"
        for first, second in record["overlapping"]
    ]
    return [f"{record['survey']}{invented}: in order", *screen.columns([head, *rows]), *pairs[:_MOST_PAIRS]]
