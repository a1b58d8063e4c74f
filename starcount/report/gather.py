"""Putting a page's content together from a prediction and the posterior behind it."""

from __future__ import annotations

import json
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from starcount.predict import Prediction
from starcount.report.content import CurveDraws, PageContent, ParameterDraws, Verdict
from starcount.report.parameters import derived_table, parameter_table

if TYPE_CHECKING:
    from starcount.posterior import Posterior


def page_content(
    title: str,
    prediction: Prediction,
    provenance: Mapping[str, Any],
    posterior: Posterior | None = None,
    truth: Mapping[str, float] | None = None,
    cautions: tuple[str, ...] = (),
) -> PageContent:
    """Return what ``write_page`` shows. ``truth`` are the true values of an invented sky, by parameter."""
    if posterior is None:
        return PageContent(title, prediction, provenance, cautions=cautions)
    parameters = _parameters(posterior, truth or {})
    derived = {name: posterior.draws(name) for name in posterior.derived_names}
    return PageContent(
        title=title,
        prediction=prediction,
        provenance=provenance,
        parameters=parameters,
        curves=_curves(posterior),
        verdict=_verdict(posterior),
        parameter_table=parameter_table(parameters),
        derived=derived_table(derived) if derived else None,
        cautions=cautions,
    )


def _parameters(posterior: Posterior, truth: Mapping[str, float]) -> tuple[ParameterDraws, ...]:
    return tuple(
        ParameterDraws(
            name=prior["name"],
            unit=prior["unit"],
            meaning=prior["meaning"],
            draws=posterior.draws(prior["name"]),
            prior_draws=posterior.prior_draws(prior["name"]),
            prior_68=(prior["q16"], prior["median"], prior["q84"]),
            prior=prior["prior"],
            truth=truth.get(prior["name"]),
        )
        for prior in posterior.priors
    )


def _curves(posterior: Posterior) -> tuple[CurveDraws, ...]:
    curves = json.loads(posterior.tree.attrs["curves"])
    if not curves:
        return ()
    knots_mag = posterior.tree["posterior"]["knot_mag"].values
    return tuple(
        CurveDraws(
            name=name,
            components=tuple(components),
            knots_mag=knots_mag,
            draws=posterior.draws(f"curve.{name}"),
            prior_draws=posterior.prior_draws(f"curve.{name}"),
        )
        for name, components in curves.items()
    )


def _verdict(posterior: Posterior) -> Verdict:
    checks = (
        (check["name"], f"{check['value']:.4g}", check["required"], bool(check["passed"])) for check in posterior.checks
    )
    return Verdict(tuple(checks), tuple(posterior.warnings))
