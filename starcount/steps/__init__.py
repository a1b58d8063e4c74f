"""What one does with starcount: the functions behind the commands, with the same names and defaults.

Each returns a ``Run`` or, where nothing is written, a dict fit for JSON. Libraries that take seconds to import are
imported by the steps that need them: predicting does without PyMC, checking without the compiled kernels.
"""

from collections.abc import Callable, Mapping, Sequence
from difflib import get_close_matches
from pathlib import Path

from starcount.errors import FailedChecks, InputError
from starcount.galaxy import LAWS, Galaxy, published_names
from starcount.steps import folder, inputs, record
from starcount.steps.record import Run
from starcount.survey import overlapping_fields, write_survey

__all__ = ["Run", "check", "count", "demo", "fit", "laws", "population", "predict", "report"]

Progress = Callable[[str, float], None]
DEMO_SURVEY = Path("fields") / "demo"
DEMO_RUN = "demo"


def silent(what: str, share: float) -> None:
    """Progress that nobody watches."""


def stretch(progress: Progress, first: float, last: float) -> Progress:
    """Progress of a part that fills the shares from ``first`` to ``last`` of the whole."""
    return lambda what, share: progress(what, first + (last - first) * share)


def check(survey: str | Path) -> dict:
    """Read a survey with full checking; return what it holds. Raises ``Problems`` with everything that is wrong."""
    found = inputs.read_survey(survey)
    pairs = [[f"{group}/{field}" for group, field in pair] for pair in overlapping_fields(found)]
    return {**record.of_survey(found), "overlapping": pairs}


def count(
    survey: str | Path,
    catalogues: Sequence[str | Path],
    *,
    columns: Mapping[str, str] | None = None,
    cuts: Sequence[str] = (),
    group: str | None = None,
    out: str | Path | None = None,
    progress: Progress = silent,
) -> Run:
    """Count star catalogues into a survey; write the survey with its counts to ``out`` (default outputs/SURVEY-counts).

    ``columns``, ``cuts`` and ``group`` as in ``starcount.catalogue.count_catalogue``. Groups that are not counted into
    keep the counts they have.
    """
    from starcount.catalogue import count_catalogue

    empty = inputs.read_survey(survey)
    final = folder.run_path(f"{inputs.short_name(survey)}-counts") if out is None else folder.new(Path(out))
    found = count_catalogue(
        catalogues,
        empty,
        columns=columns,
        cuts=cuts,
        group=group,
        progress=lambda done, total: progress("counting", done / total),
    )
    counted = record.with_counts(empty, found.counts)
    result = {
        "rows": found.rows,
        "counted": found.counted,
        "dropped": found.dropped,
        "columns": found.columns,
        "groups": [part for part in record.of_survey(counted)["groups"] if part["name"] in found.counts],
    }
    options = {"columns": dict(columns or {}), "cuts": list(cuts), "group": group}
    with folder.replaced(final) as part:
        write_survey(counted, part)
        given = [inputs.survey_folder(survey), *catalogues]
        return Run(final, record.write(part, final, "count", options, given, result))


def predict(
    survey: str | Path,
    *,
    galaxy: str | Path | None = None,
    classes: bool = False,
    run: str | None = None,
    progress: Progress = silent,
) -> Run:
    """Predict a survey's counts from a Galaxy's own values; write the tables to outputs/RUN.

    ``classes`` splits the components by star class too.
    """
    run = run or f"{inputs.short_name(survey)}-prediction"
    return _predict(survey, galaxy or "default", {}, run, classes, progress)


def _predict(survey, galaxy, values: Mapping[str, float], run: str, classes: bool, progress: Progress) -> Run:
    from starcount.forward import ForwardModel
    from starcount.predict import predict_counts
    from starcount.report import write_tables

    final = folder.run_path(run)
    model = ForwardModel(inputs.read_survey(survey), inputs.read_galaxy(galaxy))
    prediction = predict_counts(model, values=values, classes=classes, progress=stretch(progress, 0, 0.8))
    progress("writing the tables", 0.8)
    options = {"galaxy": str(galaxy), "values": dict(values), "classes": classes}
    with folder.replaced(final) as part:
        given = inputs.keep_inputs(part, model.survey, survey, model.galaxy, galaxy)
        written = record.write(part, final, "predict", options, given, record.of_prediction(prediction))
        write_tables(prediction, part, record.meta(written))
    return Run(final, written, prediction)


def fit(
    survey: str | Path,
    *,
    galaxy: str | Path | None = None,
    free: Sequence[str] | None = None,
    likelihood: str = "negative-binomial",
    curve: bool = True,
    census: bool = True,
    seed: int = 1,
    draws: int = 1000,
    chains: int = 4,
    accept_failed: bool = False,
    run: str | None = None,
    progress: Progress = silent,
) -> Run:
    """Fit a Galaxy to a survey's counts; write draws and tables to outputs/RUN.

    A fit that fails its checks is written too; then ``FailedChecks`` is raised, unless ``accept_failed``.
    """
    galaxy = galaxy or "default"
    final = folder.run_path(run or f"{inputs.short_name(survey)}-fit")
    start = inputs.read_galaxy(galaxy)
    _require_parameters(free or (), start)  # before PyMC, which takes seconds to import
    counted = inputs.read_survey(survey)

    from starcount.forward import FIT_ACCURACY, ForwardModel, derived_quantities
    from starcount.inference import fit_galaxy
    from starcount.predict import predict_counts
    from starcount.report import write_tables

    model = ForwardModel(counted, start, FIT_ACCURACY)
    settings = {"likelihood": likelihood, "draws": draws, "chains": chains, "seed": seed}
    switches = {"lf_curve": curve, "census": census, "derived": derived_quantities(model.galaxy)}
    posterior = fit_galaxy(model, free, **switches, **settings, progress=progress)
    prediction = predict_counts(model, posterior=posterior, seed=seed)
    fitted = [name for name in posterior.names if name in model.galaxy.parameters]
    options = {"galaxy": str(galaxy), "free": fitted, "curve": curve, "census": census, **settings}
    with folder.replaced(final) as part:
        given = inputs.keep_inputs(part, model.survey, survey, model.galaxy, galaxy)
        result = {**record.of_prediction(prediction), **record.of_posterior(posterior)}
        written = record.write(part, final, "fit", options, given, result)
        posterior.save(part / record.POSTERIOR)
        write_tables(prediction, part, record.meta(written))
    done = Run(final, written, prediction, posterior)
    if not posterior.certified and not accept_failed:
        raise FailedChecks(f"{final}: FAILED CHECKS\n{posterior.verdict}")
    return done


def _require_parameters(names: Sequence[str], galaxy: Galaxy) -> None:
    for name in names:
        if name not in galaxy.parameters:
            near = get_close_matches(name, galaxy.parameters, 1)
            hint = f"{near[0]!r}, or another" if near else "one"
            known = ", ".join(sorted(galaxy.parameters))
            raise InputError(f"free parameter {name!r}: not in Galaxy {galaxy.name!r}; expected {hint} of {known}")


def report(run: str | Path, *, progress: Progress = silent) -> Run:
    """Draw the figures of a run and its page, into the run's own folder."""
    from starcount.steps import page

    return page.draw(folder.folder_of(run), progress)


def population(
    name: str | Path,
    *,
    band: str = "G",
    colour: tuple[str, str] | None = None,
    galaxy: str | Path | None = None,
    out: str | Path | None = None,
) -> Run:
    """Show a population, by name or path, in a band and colour; write it to ``out`` (default outputs/population-NAME).

    "census" is what the local census leaves to its component in the Galaxy, at the Sun.
    """
    from starcount.steps import populations

    return populations.show(name, band, colour, galaxy or "default", out)


def laws() -> dict:
    """The density laws and the published Galaxies, with parameters, units and sources."""
    return {
        "laws": [record.of_law(name) for name in LAWS],
        "galaxies": [record.of_galaxy(name, inputs.read_galaxy(name)) for name in published_names()],
    }


def demo(*, quick: bool = False, progress: Progress = silent) -> Run:
    """Write the demo's survey to fields/demo unless it is there, fit it and report it as outputs/demo.

    ``quick`` predicts from the truth instead of fitting.
    """
    from starcount.demo import read_truth, write_demo

    if not DEMO_SURVEY.exists():
        write_demo(DEMO_SURVEY)
    truth = read_truth(DEMO_SURVEY)
    if quick:
        _predict(DEMO_SURVEY, truth.galaxy, truth.values, DEMO_RUN, False, stretch(progress, 0, 0.9))
    else:
        options = {"galaxy": truth.galaxy, "free": list(truth.values), "run": DEMO_RUN, "accept_failed": True}
        fit(DEMO_SURVEY, **options, progress=stretch(progress, 0, 0.9))
    done = report(DEMO_RUN, progress=stretch(progress, 0.9, 1))
    if done.posterior is not None and not done.posterior.certified:
        raise FailedChecks(f"{done.folder}: FAILED CHECKS\n{done.posterior.verdict}")
    return done
