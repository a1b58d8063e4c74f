"""From a finished run to its figures and its page."""

import shutil
from collections.abc import Callable, Mapping
from pathlib import Path

from starcount.demo import read_truth
from starcount.errors import InputError
from starcount.forward import ForwardModel
from starcount.posterior import Posterior
from starcount.predict import predict_counts
from starcount.report import PAGE, page_content, write_page
from starcount.steps import folder, inputs, record
from starcount.steps.record import Run

DRAWN = shutil.ignore_patterns("figures", PAGE)


def draw(run: Path, progress: Callable[[str, float], None]) -> Run:
    """Draw the page of a run from what lies in its folder, and put it there."""
    content = record.read(run)
    if not (run / inputs.SURVEY).is_dir():
        raise InputError(f"{run}: made by {content['step']!r}; expected a run of predict, fit or demo")
    progress("predicting", 0.0)
    posterior = Posterior.load(run / record.POSTERIOR) if content["step"] == "fit" else None
    model = ForwardModel(inputs.read_survey(run / inputs.SURVEY), inputs.read_galaxy(run / inputs.GALAXY))
    options = content["options"]
    prediction = (
        predict_counts(model, values=options["values"])
        if posterior is None
        else predict_counts(model, posterior=posterior, seed=options["seed"])
    )
    progress("drawing", 0.3)
    truth = _truth(run, model) if posterior is not None else None
    with folder.replaced(run) as part:
        shutil.copytree(run, part, ignore=DRAWN, dirs_exist_ok=True)
        title = f"{model.survey.name}: {content['run']}"
        write_page(part, page_content(title, prediction, _shown(content), posterior, truth))
    progress("drawing", 1.0)
    return Run(run, {**content, "page": (run / PAGE).as_posix()}, prediction, posterior)


def _shown(content: Mapping) -> dict:
    """The record without its results, which the page shows itself."""
    return {**content["provenance"], "step": content["step"], "options": content["options"]}


def _truth(run: Path, model: ForwardModel) -> dict[str, float] | None:
    """The true value of every parameter, where the survey was invented and says so."""
    truth = read_truth(run / inputs.SURVEY)
    if truth is None:
        return None
    floors = {f"floor.{group.name}": truth.floor for group in model.survey.groups}
    return {**inputs.read_galaxy(truth.galaxy).values, **truth.values, **floors}
