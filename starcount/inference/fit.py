"""From a forward model with counts to a posterior."""

from collections.abc import Callable, Mapping, Sequence

from starcount.inference import mapped_nuts, model, quadratic_map, tree
from starcount.inference.mode import find_mode
from starcount.inference.target import Target
from starcount.posterior import Posterior

Progress = Callable[[str, float], None]
"""Told what is being done and which share of the whole fit is over."""

_SAMPLING_FROM, _SAMPLING_TO = 0.30, 0.95


def fit_galaxy(
    forward_model,
    parameters: Sequence[str] | None = None,
    *,
    likelihood: str = "negative-binomial",
    lf_curve: bool = True,
    census: bool = True,
    draws: int = 1000,
    tune: int = 400,
    chains: int = 4,
    seed: int = 1,
    progress: Progress | None = None,
    derived: Callable[[Mapping[str, float]], Mapping[str, float]] | None = None,
    kernels=None,
) -> Posterior:
    """Fit ``parameters`` (all that can be fitted, by default) to the counts of the model's survey.

    ``derived`` turns a draw's values into further numbers to be kept with the draws. The posterior says itself whether
    it passed its checks (``Posterior.verdict``); where it did not, nothing else about it should be believed.
    """
    tell = progress or (lambda what, share: None)
    tell("putting the model together", 0.0)
    pymc_model = model.build_model(
        forward_model, parameters, likelihood=likelihood, lf_curve=lf_curve, census=census, kernels=kernels
    )
    target = Target(pymc_model)
    tell("finding the mode", 0.1)
    mode = find_mode(target, seed)
    tell("mapping the posterior", 0.2)
    q = quadratic_map.build(mode.x, target.jacobians, seed)

    def sampling(share: float) -> None:
        tell("sampling", _SAMPLING_FROM + share * (_SAMPLING_TO - _SAMPLING_FROM))

    sampling(0.0)
    chain = mapped_nuts.sample(target, q, draws=draws, tune=tune, chains=chains, seed=seed, progress=sampling)
    tell("checking", _SAMPLING_TO)
    fitted = tree.Fit(forward_model, parameters, likelihood, lf_curve, census, seed, target, mode, q, chain, derived)
    found = tree.assemble(fitted)
    tell("done", 1.0)
    return Posterior(found)
