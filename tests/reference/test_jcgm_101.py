"""Worked examples of JCGM 101:2008, "Propagation of distributions using a Monte Carlo method".

Clause 9.2 (additive model): four independent inputs of standard uncertainty 1.
  9.2.2, normal inputs: 95 % interval +-3.92 (2 x 1.96; follows from theory).
  9.2.3, rectangular inputs: 95 % interval +-3.88, as Table 3 of the document gives it.
Clause 9.2.4: one input of standard uncertainty 10: +-17.0, u = 10.1 (Table 4).
The figures are quoted from memory; the document was not at hand. The document's own runs use 10^6
draws, and so do these.
"""

import numpy as np
import pytest

from fieldround.solve.montecarlo import propagate

ROOT3 = np.sqrt(3.0)


def test_normal_inputs_9_2_2():
    drawn = propagate(lambda rng, n: rng.standard_normal((n, 4)).sum(axis=1), 1, draws=1_000_000)
    assert drawn.sd == pytest.approx(2.0, abs=0.01)
    assert drawn.low == pytest.approx(-3.92, abs=0.03)
    assert drawn.high == pytest.approx(3.92, abs=0.03)


def test_rectangular_inputs_9_2_3():
    drawn = propagate(
        lambda rng, n: rng.uniform(-ROOT3, ROOT3, (n, 4)).sum(axis=1), 1, draws=1_000_000
    )
    assert drawn.sd == pytest.approx(2.0, abs=0.01)
    assert drawn.low == pytest.approx(-3.88, abs=0.03)
    assert drawn.high == pytest.approx(3.88, abs=0.03)


def test_one_dominant_rectangular_input_9_2_4():
    reach = np.array([1.0, 1.0, 1.0, 10.0]) * ROOT3
    drawn = propagate(
        lambda rng, n: rng.uniform(-reach, reach, (n, 4)).sum(axis=1), 1, draws=1_000_000
    )
    assert drawn.sd == pytest.approx(10.1, abs=0.1)
    assert drawn.low == pytest.approx(-17.0, abs=0.1)
    assert drawn.high == pytest.approx(17.0, abs=0.1)


def test_the_adaptive_procedure_keeps_its_tolerance_9_2_2():
    # Two digits of u = 2.0 ask for a tolerance of 0.05 in each figure (7.9.2).
    drawn = propagate(lambda rng, n: rng.standard_normal((n, 4)).sum(axis=1), seed=1)
    assert drawn.sd == pytest.approx(2.0, abs=0.05)
    assert drawn.low == pytest.approx(-3.92, abs=0.05)
    assert drawn.high == pytest.approx(3.92, abs=0.05)
