"""Truncated, hurdle and zero-inflated fits against R's pscl, VGAM and MASS, on the boating data.

R is an outside check only: the tests are skipped where Rscript or a package is not there.
Traps that a comparison falls into, known and kept out of it:

- MASS (``glm.nb``) takes theta as known: its errors are smaller than those of the whole model.
  On these data, where the price and theta are tied, by a fifth. Only estimates are compared.
- pscl's ``vcov`` leaves theta out of what it shows, not out of the Hessian that it inverts: its
  errors of the coefficients are those of the whole model. Sandwich errors made from its scores
  leave theta out, and are not compared.
- VGAM errors come from expected information, averaged; ours from the observed Hessian. For the
  truncated Poisson they are the same, for the truncated NB2 they differ by up to a third.
- In the hurdle with all regressors, nobody who paid the user fee stayed at home: the logit has no
  maximum. R returns 15.7 with a standard error of 1,497 and converges; here it is an error.
"""

from __future__ import annotations

import shutil
import subprocess
from pathlib import Path

import numpy as np
import pytest

from pipeline.demand.build import build_samples
from pipeline.demand.registry import FAMILIES
from pipeline.errors import DemandError
from tests.conftest import RecordCheck
from tests.published.boating import COVARIATES, boating_trips

SOURCE = "R 4.2, packages pscl 1.5.5, VGAM 1.1.7, MASS 7.3.58"
SCRIPT = """
suppressMessages({library(pscl); library(VGAM); library(MASS)})
d <- read.csv(commandArgs(TRUE)[1])
x <- "travel_cost + quality + ski + income + userfee + costC + costH"
f <- as.formula(paste("trips ~", x))
g <- as.formula(paste("trips ~", x, "| quality + income"))
p <- d[d$trips > 0, ]
say <- function(name, ll, est, se) cat(sprintf("%s;%.8f;%s;%s\n", name, ll,
  paste(sprintf("%.8f", est), collapse = ","), paste(sprintf("%.8f", se), collapse = ",")))
k <- function(m) sqrt(diag(vcov(m)))
h <- hurdle(g, data = d, dist = "negbin")
say("hurdle", h$loglik, c(coef(h), 1 / h$theta), k(h))
z <- zeroinfl(g, data = d, dist = "poisson", reltol = 1e-14)
say("zero_inflated_poisson", z$loglik, coef(z), k(z))
z <- zeroinfl(g, data = d, dist = "negbin", reltol = 1e-14)
say("zero_inflated_negative_binomial", z$loglik, c(coef(z), 1 / z$theta), k(z))
v <- vglm(f, family = pospoisson(), data = p, epsilon = 1e-12)
say("truncated_poisson", as.numeric(logLik(v)), coef(v), k(v))
v <- vglm(f, family = posnegbinomial(), data = p, epsilon = 1e-12)
b <- coef(v)
say("truncated_negative_binomial", as.numeric(logLik(v)), c(b[-2], exp(-b[2])), k(v)[-2])
n <- glm.nb(f, data = d, control = glm.control(epsilon = 1e-12, maxit = 100))
say("negative_binomial", as.numeric(logLik(n)), c(coef(n), 1 / n$theta), k(n))
"""
#: Largest relative difference of estimates and of errors; None: not comparable, see above.
TOLERANCES: dict[str, tuple[float, float | None]] = {
    "hurdle": (1e-4, 1e-3),
    "zero_inflated_poisson": (1e-4, 1e-2),
    "zero_inflated_negative_binomial": (1e-3, 1e-2),
    "truncated_poisson": (1e-5, 1e-4),
    "truncated_negative_binomial": (2e-3, None),
    "negative_binomial": (1e-4, None),
}


def r_results(folder: Path) -> dict[str, tuple[float, list[float], list[float]]]:
    """Log-likelihood, estimates and errors by model, as R prints them."""
    if shutil.which("Rscript") is None:
        pytest.skip("Rscript is not installed; Debian: r-cran-pscl r-cran-vgam r-cran-mass")
    boating_trips().to_csv(folder / "trips.csv", index=False)
    (folder / "fits.R").write_text(SCRIPT)
    run = subprocess.run(
        ["Rscript", "fits.R", "trips.csv"], cwd=folder, capture_output=True, text=True, check=False
    )
    if "there is no package" in run.stderr:
        pytest.skip(f"an R package is missing: {run.stderr.strip().splitlines()[-1]}")
    assert run.returncode == 0, run.stderr
    found = {}
    for line in run.stdout.splitlines():
        name, value, *lists = line.split(";")
        estimates, errors = ([float(v) for v in part.split(",")] for part in lists)
        found[name] = (float(value), estimates, errors)
    return found


@pytest.fixture(scope="module")
def by_r(
    tmp_path_factory: pytest.TempPathFactory,
) -> dict[str, tuple[float, list[float], list[float]]]:
    return r_results(tmp_path_factory.mktemp("r"))


@pytest.mark.slow
@pytest.mark.parametrize("name", TOLERANCES)
def test_fits_agree_with_r(
    name: str,
    by_r: dict[str, tuple[float, list[float], list[float]]],
    record_check: RecordCheck,
) -> None:
    value, estimates, errors = by_r[name]
    (sample,) = build_samples(None, boating_trips(), COVARIATES, zero_terms=("quality", "income"))
    model = FAMILIES[name].fit(sample, errors="model")
    tolerance, error_tolerance = TOLERANCES[name]
    record_check(f"boating, {name}: log-likelihood", model.log_likelihood, value, 2e-4, SOURCE)
    apart = float(np.abs(model.estimate / np.array(estimates) - 1).max())
    record_check(f"boating, {name}: estimates, largest difference", apart, 0, tolerance, SOURCE)
    if error_tolerance is not None:
        ratio = model.std_error[: len(errors)] / np.array(errors)
        apart = float(np.abs(ratio - 1).max())
        what = f"boating, {name}: standard errors, largest difference"
        record_check(what, apart, 0, error_tolerance, SOURCE)


def test_the_separated_hurdle_is_named_instead_of_fitted() -> None:
    (sample,) = build_samples(None, boating_trips(), COVARIATES)
    with pytest.raises(DemandError, match="separation in the hurdle: 'userfee'"):
        FAMILIES["hurdle"].fit(sample, errors="model")
