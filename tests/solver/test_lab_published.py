"""The fit of a pair's excess on published mixtures that had no part in making it.

R: the measured mixtures published with Bilodeau et al., Chem. Eng. J. 464 (2023) 142454 (the test set of their
repository): log10 of the dynamic viscosity in mPa·s at mole fractions 0(0.1)1 of the heavier, here to five digits;
molar masses from the formulas. Dynamic viscosity is taken as v, mass fractions from the molar masses.
"""

from __future__ import annotations

import numpy as np
import pytest

from solver.lab import Blends, fit
from solver.laws import index_of_law

# heavier + lighter: molar masses, log10 of the viscosity
MIXTURES = {
    "octamethylcyclotetrasiloxane + decane": (296.62, 142.28, (
        -0.13566, -0.12101, -0.09349, -0.06105, -0.03047, 0.00453, 0.04199, 0.08438, 0.13055, 0.18124, 0.23513)),
    "octamethylcyclotetrasiloxane + dodecane": (296.62, 170.34, (
        0.03934, 0.05008, 0.06012, 0.06940, 0.08253, 0.09957, 0.11843, 0.14163, 0.16992, 0.20332, 0.23513)),
    "octamethylcyclotetrasiloxane + tetradecane": (296.62, 198.39, (
        0.22936, 0.20038, 0.18909, 0.18631, 0.18350, 0.18061, 0.18277, 0.18775, 0.19795, 0.21492, 0.23513)),
    "octamethylcyclotetrasiloxane + benzene": (296.62, 78.11, (
        -0.27939, -0.23137, -0.17492, -0.11578, -0.05797, -0.00213, 0.05289, 0.10628, 0.15821, 0.21011, 0.25910)),
    "2,2,4,6,6-pentamethylheptane + mesitylene": (170.34, 120.19, (
        -0.24198, -0.22526, -0.20585, -0.18140, -0.15718, -0.13010, -0.10304, -0.07324, -0.04422, -0.01439, 0.01610)),
    "2,2,4,6,6-pentamethylheptane + pseudocumene": (170.34, 120.19, (
        -0.16301, -0.15896, -0.15149, -0.13715, -0.11941, -0.10073, -0.07957, -0.05765, -0.03416, -0.00973, 0.01610)),
    "acetophenone + toluene": (120.15, 92.14, (
        -0.27148, -0.19568, -0.13148, -0.07525, -0.02589, 0.01817, 0.05763, 0.09370, 0.12691, 0.15765, 0.18629)),
    "dibutyl ether + vinyl acetate": (130.23, 86.09, (
        -0.43214, -0.41715, -0.40053, -0.38313, -0.36532, -0.34577, -0.32663, -0.30656, -0.28738, -0.26793, -0.24856)),
    "o-xylene + tetrahydrofuran": (106.17, 72.11, (
        -0.40458, -0.37257, -0.34406, -0.31871, -0.29599, -0.27535, -0.25698, -0.24040, -0.22522, -0.21180, -0.19923)),
    "heptanol + cyclohexane": (116.20, 84.16, (
        -0.18838, -0.15391, -0.08413, -0.01355, 0.06555, 0.14548, 0.21996, 0.29254, 0.36466, 0.43602, 0.50749)),
}


@pytest.mark.parametrize("used", [(5,), (2, 4, 6, 8)])
@pytest.mark.parametrize("name", MIXTURES)
def test_a_fit_is_no_worse_than_the_law_alone_on_the_points_it_has_not_seen(name: str, used: tuple[int, ...]) -> None:
    heavier, lighter, logs = MIXTURES[name]
    x = np.linspace(0.0, 1.0, 11)
    f = x * heavier / (x * heavier + (1.0 - x) * lighter)
    kv = 10.0 ** np.array(logs)
    index, value = index_of_law("refutas")
    ends = index(kv[[0, -1]])
    ideal = (1.0 - f) * ends[0] + f * ends[1]
    every = Blends("refutas", f, 1.0 - f, kv, ideal, float(value(0.5 * (ends[0] + ends[1]))))
    terms = fit(every.where(np.array(used))).terms
    unseen = every.where(np.array([k for k in range(1, 10) if k not in used]))
    assert unseen.error_pct(terms).mean() <= unseen.error_pct(()).mean() + 0.2
    if len(used) == 4:
        assert unseen.error_pct(terms).mean() <= 1.5  # seen: 0.08 to 1.42, where the law alone is 2.4 to 22
