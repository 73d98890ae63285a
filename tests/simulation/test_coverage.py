"""Errors that hold: over 500 seeds the error meets its Cramer-Rao bound and the 95 % region holds 92 to 98 %.

The scenes come from the independent simulator; systematics (station offsets, height) are drawn from their priors.
With 500 seeds one standard deviation of the coverage is 1.0 %, of the rms ratio about 3 %.
"""

from __future__ import annotations

import pytest
from campaigns import SCENES, run
from scipy.stats import chi2


@pytest.mark.parametrize("scene", SCENES)
def test_error_meets_its_bound_and_its_region(scene):
    campaign = SCENES[scene]()
    outcome = run(campaign, range(500))
    assert set(outcome.verdicts) == {"fix"}, outcome
    assert outcome.ratio <= 1.1, outcome
    assert 0.92 <= outcome.coverage <= 0.98, outcome
    # Mean of 500 normalised errors squared: 99.9 % interval of its chi-square distribution.
    low, high = chi2.ppf([0.0005, 0.9995], 500 * campaign.plane) / 500
    assert low <= outcome.mean_square <= high, outcome
