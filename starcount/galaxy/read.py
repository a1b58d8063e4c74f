"""Reading a Galaxy from TOML: a file of the user's, or one of the sets in ``published/`` by name.

Everything wrong with a file is reported at once, with its key, the value given and the values allowed.
"""

import math
import tomllib
from collections.abc import Collection, Mapping
from difflib import get_close_matches
from importlib import resources
from pathlib import Path

from starcount.constants import CLASS_WORDS
from starcount.errors import Problem, Problems, UnknownName
from starcount.galaxy.component import PRIORS, Component, Layer, Parameter
from starcount.galaxy.galaxy import CENSUS, Z0, Galaxy
from starcount.galaxy.law import Law, LawParameter
from starcount.galaxy.laws import LAWS

PUBLISHED = resources.files("starcount.galaxy") / "published"
POPULATION_FILES = (".toml", ".ecsv")
_TOP = {"format", "name", "description", "sun", "census", "component"}
_COMPONENT = {"name", "meaning", "law", "population", "amplitude", "parameters", "layer"}
_AMPLITUDE = {
    "share": LawParameter("share", "", "stars of the reference window at the Sun, times the remainder", 1e-8, 10.0),
    "density": LawParameter("density", "pc-3", "stars of the reference window at the Sun", 1e-12, 1e3),
    "total": LawParameter("total", "", "stars of the reference window in all", 1.0, 1e13),
}
_CENSUS = LawParameter("density_pc3", "pc-3", "stars with 4.5 < M_V < 8.5 at the Sun, all components", 1e-6, 1.0)
_HEIGHT = LawParameter("z0_kpc", "kpc", "height of the Sun above the plane", -0.2, 0.2)


def published_names() -> tuple[str, ...]:
    """The names of the Galaxies that come with the package."""
    return tuple(sorted(entry.name.removesuffix(".toml") for entry in PUBLISHED.iterdir() if entry.suffix == ".toml"))


def is_file_name(population: str) -> bool:
    """Whether a component's population is meant as a file of the user's own."""
    return Path(population).suffix in POPULATION_FILES


def read_galaxy(
    name_or_path: str | Path = "default",
    populations: Collection[str] | None = None,
    absent: Mapping[str, str] | None = None,
) -> Galaxy:
    """Return a Galaxy by its published name or from the user's TOML file.

    Files of populations are named from the folder of the Galaxy's own file. With ``populations`` any other name of a
    population is refused, with the reason if ``absent`` has one; without, names are taken as they are.
    Raises ``Problems`` with everything that is wrong with the file, ``UnknownName`` for a name that is neither.
    """
    if str(name_or_path) in published_names():
        source, label = PUBLISHED / f"{name_or_path}.toml", f"{name_or_path}.toml"
    elif Path(name_or_path).is_file():
        source, label = Path(name_or_path), str(name_or_path)
    elif str(name_or_path).endswith(".toml"):
        raise Problems(Problem(str(name_or_path), "", "no such file", "a Galaxy in TOML"))
    else:
        raise UnknownName("Galaxy", str(name_or_path), published_names())
    try:
        text = tomllib.loads(source.read_text(encoding="utf-8"))
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as error:
        raise Problems(Problem(label, "", f"not TOML ({error})", "TOML text in UTF-8")) from None
    return _Reader(label, Path(str(source)).parent, populations, absent or {}).galaxy(text)


def _is_number(given) -> bool:
    return isinstance(given, int | float) and not isinstance(given, bool)


class _Reader:
    """Collects the problems of one file while its parts are built."""

    def __init__(self, file: str, folder: Path, populations: Collection[str] | None, absent: Mapping[str, str]):
        self.file, self.folder = file, folder
        self.populations, self.absent = populations, absent
        self.problems: list[Problem] = []

    def wrong(self, where: str, found: str, allowed: str) -> None:
        self.problems.append(Problem(self.file, where, found, allowed))

    def galaxy(self, text: dict) -> Galaxy:
        self.known_keys("", text, _TOP)
        if text.get("format") != 1:
            self.wrong("format", repr(text.get("format")), "1")
        sun = self.table("sun", text.get("sun", {}))
        self.known_keys("sun", sun, {"R0_kpc", "z0_kpc"})
        R0 = self.number("sun.R0_kpc", sun.get("R0_kpc"), 1.0, 20.0)
        parameters = {Z0: self.parameter(Z0, sun.get("z0_kpc"), _HEIGHT, default_prior="normal")}
        blocks = text.get("component", [])
        if not isinstance(blocks, list) or not blocks:
            self.wrong("component", "no component", "at least one [[component]]")
            blocks = []
        remainders = sum(isinstance(b, dict) and b.get("amplitude") == "remainder" for b in blocks)
        if remainders > 1:
            self.wrong(
                "component", f'{remainders} components with amplitude = "remainder"', "one: what the census leaves"
            )
        if remainders:
            census = self.table("census", text.get("census", {}))
            self.known_keys("census", census, {"density_pc3"})
            parameters[CENSUS] = self.parameter(CENSUS, census.get("density_pc3"), _CENSUS)
        elif any(isinstance(b, dict) and b.get("amplitude") == "share" for b in blocks):
            self.wrong("component", 'a share, but no component with amplitude = "remainder"', "one to take shares of")
        components = [self.component(i, block, parameters) for i, block in enumerate(blocks)]
        names = [c.name for c in components if c]
        for name in {n for n in names if names.count(n) > 1}:
            self.wrong("component", f"the name {name!r} twice", "names that differ")
        if self.problems:
            raise Problems(*self.problems)
        return Galaxy(str(text.get("name", "")), str(text.get("description", "")), R0, parameters, tuple(components))

    def component(self, i: int, block: dict, parameters: dict) -> Component | None:
        where = f"component {i + 1}"
        block = self.table(where, block)
        name = block.get("name")
        if not isinstance(name, str) or not name.replace("_", "").isalnum():
            self.wrong(f"{where}.name", repr(name), "a word of letters and digits")
            return None
        where = f"component {name!r}"
        self.known_keys(where, block, _COMPONENT)
        law = LAWS.get(block["law"]) if isinstance(block.get("law"), str) else None
        if law is None:
            self.wrong(f"{where}.law", repr(block.get("law")), f"one of {', '.join(sorted(LAWS))}")
            return None
        amplitude = block.get("amplitude")
        given = dict(self.table(f"{where}.parameters", block.get("parameters", {})))
        expected = {p.name: p for p in law.parameters}
        if isinstance(amplitude, str) and amplitude in _AMPLITUDE:
            expected[amplitude] = _AMPLITUDE[amplitude]
        elif amplitude != "remainder":
            self.wrong(f"{where}.amplitude", repr(amplitude), "one of remainder, share, density, total")
        if amplitude == "total" and law.ln_total is None:
            self.wrong(f"{where}.amplitude", "'total'", f"share or density: the law {law.name!r} has no finite total")
        self.known_keys(f"{where}.parameters", given, set(expected))
        for p in expected.values():
            parameters[f"{name}.{p.name}"] = self.parameter(f"{name}.{p.name}", given.get(p.name), p)
        population = self.population(f"{where}.population", block.get("population"))
        blocks = block.get("layer", [{"name": name}])
        if not isinstance(blocks, list):
            self.wrong(f"{where}.layer", repr(blocks), "[[component.layer]] blocks")
            blocks = []
        layers = tuple(self.layer(where, j, b, law) for j, b in enumerate(blocks))
        for j, layer in enumerate(layers):
            self.scaled(f"{where}, layer {j + 1}.ratios", name, layer, expected, parameters)
        return Component(name, str(block.get("meaning", "")), law, population, str(amplitude), layers)

    def population(self, where: str, given) -> str:
        """The name of a population, or where its file is."""
        if isinstance(given, str) and is_file_name(given):
            path = self.folder / given
            if not path.is_file():
                self.wrong(where, f"{given!r}, no such file", f"a file, named from the folder {self.folder}")
            return str(path)
        known = self.populations
        if not isinstance(given, str) or (known is not None and given not in known):
            reason = f", left out ({self.absent[given]})" if isinstance(given, str) and given in self.absent else ""
            names = f"one of {', '.join(sorted(known))}" if known is not None else "a population's name"
            found = "missing" if given is None else repr(given)
            self.wrong(where, f"{found}{reason}", f"{names}, or the path of a file .toml or .ecsv")
        return str(given)

    def scaled(self, where: str, name: str, layer: Layer, law: Mapping[str, LawParameter], parameters: dict) -> None:
        """Refuse ratios that take a parameter out of the law's own range."""
        for key, ratio in layer.ratios.items():
            value, p = parameters[f"{name}.{key}"].value, law[key]
            if p.choices:
                self.wrong(f"{where}.{key}", "a ratio of a choice", f"one of {', '.join(dict(p.choices))}, in settings")
            elif not p.lower <= ratio * value <= p.upper and math.isfinite(ratio * value):
                allowed = f"a product from {p.lower:g} to {p.upper:g}, as the law has it"
                self.wrong(f"{where}.{key}", f"{ratio:g} times {value:g} is {ratio * value:g}", allowed)

    def layer(self, where: str, j: int, block: dict, law: Law) -> Layer:
        where = f"{where}, layer {j + 1}"
        block = self.table(where, block)
        self.known_keys(where, block, {"name", "classes", "M_mag", "ratios", "settings"})
        by_name = {p.name: p for p in law.parameters}
        ratios = self.table(f"{where}.ratios", block.get("ratios", {}))
        settings = self.table(f"{where}.settings", block.get("settings", {}))
        for key in (*ratios, *settings):
            if key not in by_name:
                self.wrong(f"{where}.{key}", "a parameter the law does not have", f"one of {', '.join(by_name)}")
        M = block.get("M_mag")
        if M is not None and not (isinstance(M, list) and len(M) == 2 and all(map(_is_number, M)) and M[0] < M[1]):
            self.wrong(f"{where}.M_mag", repr(M), "[brighter limit, fainter limit]")
            M = None
        return Layer(
            name=str(block.get("name", f"layer {j + 1}")),
            classes=self.classes(f"{where}.classes", block["classes"]) if "classes" in block else None,
            M_mag=tuple(map(float, M)) if M else None,
            ratios={k: self.number(f"{where}.ratios.{k}", x, 1e-3, 1e3) for k, x in ratios.items() if k in by_name},
            settings={k: self.choice(f"{where}.{k}", x, by_name[k]) for k, x in settings.items() if k in by_name},
        )

    def classes(self, where: str, given) -> tuple[str, ...] | None:
        if isinstance(given, list) and given and set(map(str, given)) <= set(CLASS_WORDS):
            return tuple(given)
        self.wrong(where, repr(given), f"a list of {', '.join(map(repr, CLASS_WORDS))}")
        return None

    def parameter(self, name: str, given, law: LawParameter, default_prior="lognormal") -> Parameter:
        """A parameter from ``{value, error, prior, lower, upper, reference}``, a bare number or a choice by name."""
        if given is None and law.neutral is not None:
            given = {"value": law.neutral, "reference": "neutral value"}
        if not isinstance(given, dict):
            given = {"value": given}
        self.known_keys(name, given, {"value", "error", "prior", "lower", "upper", "reference"})
        lower = self.number(f"{name}.lower", given.get("lower", law.lower), law.lower, law.upper)
        upper = self.number(f"{name}.upper", given.get("upper", law.upper), law.lower, law.upper)
        lower, upper = (b if math.isnan(a) else a for a, b in ((lower, law.lower), (upper, law.upper)))
        if lower >= upper:
            self.wrong(name, f"support from {lower:g} to {upper:g}", "lower < upper")
        value = self.choice(f"{name}.value", given.get("value"), law, lower, upper)
        error = self.number(f"{name}.error", given.get("error", 0.0), 0.0, math.inf)
        prior = given.get("prior", default_prior if law.lower >= 0.0 else "normal")
        if prior not in PRIORS:
            self.wrong(f"{name}.prior", repr(prior), f"one of {', '.join(PRIORS)}")
        reference = str(given.get("reference", ""))
        return Parameter(name, value, error, law.unit, lower, upper, prior, reference, law.meaning, law.fittable)

    def choice(self, where: str, given, law: LawParameter, lower=-math.inf, upper=math.inf) -> float:
        """A number within the support, or one of the law's named choices."""
        named = dict(law.choices)
        if named:
            if given in named:
                return named[given]
            if given not in named.values():
                self.wrong(where, repr(given), f"one of {', '.join(named)}")
                return math.nan
        return self.number(where, given, max(lower, law.lower), min(upper, law.upper))

    def number(self, where: str, given, lower: float, upper: float) -> float:
        if not (_is_number(given) and lower <= given <= upper):
            found = "missing" if given is None else repr(given)
            self.wrong(where, found, f"a number from {lower:g} to {upper:g}")
            return math.nan
        return float(given)

    def table(self, where: str, given) -> dict:
        if isinstance(given, dict):
            return given
        self.wrong(where, repr(given), "a table of keys and values")
        return {}

    def known_keys(self, where: str, given: dict, known: set[str]) -> None:
        for key in given:
            if key not in known:
                near = get_close_matches(key, known, 1)
                hint = f"{near[0]!r}" if near else f"one of {', '.join(sorted(known))}"
                self.wrong(f"{where}.{key}".lstrip("."), "an unknown key", hint)
