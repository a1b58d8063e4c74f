"""What the commands print: results on standard output, everything else on standard error."""

import json
import sys
import time
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager

import click

Progress = Callable[[str, float], None]
"""``progress(what, share)``, told by a step what it does now, and which share of all is done, 0 to 1."""

QUIET_S = 2.0
"""Work shorter than this shows no progress."""

PLAIN_LINE_EVERY_S = 10.0

json_option = click.option("--json", "as_json", is_flag=True, help="One JSON object on standard output, nothing else.")


galaxy_option = click.option(
    "--galaxy", metavar="NAME|PATH", help="A published Galaxy (see: starcount laws), or your own TOML file."
)


def run_option(verb: str):
    """The option that names a run."""
    return click.option("--run", metavar="NAME", help=f"Folder under outputs/.  [default: SURVEY-{verb}]")


def assignments(pairs: Iterable[str]) -> dict[str, str]:
    """``key=column`` options as a dict."""
    found = {}
    for pair in pairs:
        key, sign, name = pair.partition("=")
        if not (key and sign and name):
            raise click.UsageError(f"--column {pair!r}; expected KEY=COLUMN, e.g. ra=RAJ2000")
        found[key.strip()] = name.strip()
    return found


def say(text: str = "") -> None:
    """A line for the person, not for the pipe."""
    click.echo(text, err=True)


def show(record: dict, lines: Iterable[str], as_json: bool) -> None:
    """Print a result once: as one JSON object, or as lines."""
    if as_json:
        click.echo(json.dumps(record, allow_nan=False))
    else:
        for line in lines:
            click.echo(line)


def failure(message: str, status: int, as_json: bool, before: str = "") -> int:
    """Report why there is no result, as lines and, where JSON was asked for, as one object; return the status."""
    if before:
        say(before)
    lines = message.splitlines()
    for line in lines:
        say(f"starcount: {line}")
    if as_json:
        click.echo(json.dumps({"exit_status": status, "problems": lines}))
    return status


def columns(rows: Sequence[Sequence[str]]) -> list[str]:
    """Rows of text as aligned lines."""
    widths = [max(map(len, column)) for column in zip(*rows, strict=True)]
    return ["  ".join(cell.ljust(w) for cell, w in zip(row, widths, strict=True)).rstrip() for row in rows]


def group_table(groups: Sequence[dict]) -> list[str]:
    """What the groups of a survey hold, a line each."""
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
            _colour_bins(group["colour"]),
            "not counted" if group["stars"] is None else str(group["stars"]),
        ]
        for group in groups
    ]
    return columns([head, *rows])


def _colour_bins(colour: dict | None) -> str:
    """Such as ``BP-RP, 12 from 0.4 to all redder``."""
    if colour is None:
        return "-"
    low, high = colour["c_lo_mag"], colour["c_hi_mag"]
    ends = "all bluer" if low is None else f"{low:g}", "all redder" if high is None else f"{high:g}"
    return f"{'-'.join(colour['bands'])}, {colour['bins']} from {' to '.join(ends)}"


@contextmanager
def progress() -> Iterator[Progress]:
    """A function to tell progress to: a bar with an estimate on a terminal, plain lines otherwise."""
    if sys.stderr.isatty():
        with _bar() as tell:
            yield tell
    else:
        yield _plain(time.monotonic)


@contextmanager
def _bar() -> Iterator[Progress]:
    from rich.console import Console
    from rich.progress import Progress as Bars
    from rich.progress import TimeElapsedColumn, TimeRemainingColumn

    looks = (*Bars.get_default_columns()[:-1], TimeElapsedColumn(), TimeRemainingColumn())
    bars = Bars(*looks, console=Console(stderr=True), transient=True)
    task = bars.add_task("", total=1.0, visible=False)
    start = time.monotonic()

    def tell(what: str, share: float) -> None:
        shown = time.monotonic() - start > QUIET_S
        bars.update(task, description=what, completed=share, visible=shown)

    with bars:
        yield tell


def _plain(clock: Callable[[], float]) -> Progress:
    """Lines such as ``sampling: 30 % of all, about 35 s left``: one for each new thing, then one every ten seconds."""
    begun = last = clock()
    doing = ""

    def tell(what: str, share: float) -> None:
        nonlocal last, doing
        now = clock()
        due = now - last >= PLAIN_LINE_EVERY_S or what != doing
        if now - begun < QUIET_S or not due or share >= 1.0:
            return
        last, doing = now, what
        left = f", about {(now - begun) * (1 - share) / share:.0f} s left" if share > 0 else ""
        say(f"{what}: {100 * share:.0f} % of all{left}")

    return tell


def run_lines(record: dict) -> list[str]:
    """What a run found, in lines: counts by group, parameters of a fit, the bins that fit worst, where things are."""
    result = record["result"]
    lines = [*_group_lines(result["groups"]), *(f"caution: {caution}" for caution in result["cautions"])]
    lines += _class_lines(result["groups"])
    if "verdict" in result:
        lines += ["", *_parameter_lines(result["parameters"]), "", result["verdict"]]
        lines += [f"caution: {warning}" for warning in result["warnings"]]
    if result["worst_bins"]:
        lines += ["", "least probable bins:", *_bin_lines(result["worst_bins"])]
    lines += ["", f"written: {record['folder']}"]
    return [*lines, f"page: {record['page']}" if "page" in record else f"next: starcount report {record['run']}"]


def _group_lines(groups: dict) -> list[str]:
    rows = [["group", "expected in all", "counted", "expected there", "counted / expected"]]
    for name, group in groups.items():
        n, there = group["counted"], group["expected_of_counted"]
        compared = ["-", "-", "-"] if n is None else [str(n), f"{there:.1f}", f"{n / there:.3f}" if there else "-"]
        rows.append([name, f"{group['expected']:.1f}", *compared])
    return columns(rows)


def _class_lines(groups: dict) -> list[str]:
    """Stars by component and class, where they were asked for."""
    lines = []
    for name, group in groups.items():
        if group["classes"]:
            kinds = list(next(iter(group["classes"].values())))
            rows = [[f"expected of {name}", *kinds]]
            rows += [[part, *(f"{stars[kind]:.1f}" for kind in kinds)] for part, stars in group["classes"].items()]
            lines += ["", *columns(rows)]
    return lines


def _parameter_lines(parameters: list[dict]) -> list[str]:
    rows = [["parameter", "median", "68 % interval (equal-tailed)", "unit", "r-hat", "ESS bulk", "prior width left"]]
    for p in parameters:
        interval = f"{p['q16']:.4g} to {p['q84']:.4g}"
        left = "-" if p["prior_width_left"] is None else f"{100 * p['prior_width_left']:.0f} %"
        chains = [f"{p['r_hat']:.3f}", f"{p['ess_bulk']:.0f}"]
        rows.append([p["name"], f"{p['q50']:.4g}", interval, p["unit"], *chains, left])
    return columns(rows)


def _bin_lines(bins: list[dict]) -> list[str]:
    coloured = "colour" in bins[0]
    head = ["group", "field", "from", "to [mag]", *(["colour"] if coloured else []), "counted"]
    rows = [[*head, "expected", "pull", "probability"]]
    for b in bins:
        place = [b["group"], b["field"], f"{b['m_lo']:g}", f"{b['m_hi']:g}", *([_colour(b)] if coloured else [])]
        rows.append([*place, str(b["n"]), f"{b['expected']:.1f}", f"{b['pull']:+.1f}", f"{b['tail']:.2g}"])
    return columns(rows)


def _colour(b: dict) -> str:
    """Such as ``BP-RP 0.4 to 0.8``, open bins without the limit they have not; a dash without a colour."""
    ends = [word + f"{b[limit]:g}" for word, limit in (("from ", "c_lo"), ("to ", "c_hi")) if b[limit] is not None]
    return " ".join([b["colour"] or "-", *ends])
