"""The order of placing keeps its stated rule, checked step by step."""

from dataclasses import replace

import numpy as np

from layout.outputs.sheet.order import placing_order

VERTEX = np.array([0.0, 0.0, 0.125])


def _rank(row):
    return {"reference": 0, "ground": 1}.get(row.role, 2 if row.kind_type == "electrode" else 3)


def test_every_step_keeps_the_rule(result):
    sensors = list(result.layouts[0].sensors)
    sensors[4] = replace(sensors[4], role="ground")
    order = placing_order(tuple(sensors), VERTEX)
    assert sorted(order) == list(range(len(sensors)))
    ranks = [_rank(sensors[at]) for at in order]
    assert ranks == sorted(ranks)
    assert ranks[:2] == [0, 1]

    def away(at, others):
        return min(np.linalg.norm(sensors[at].scalp_position - other) for other in others)

    for step, at in enumerate(order):
        rest = [other for other in order[step:] if _rank(sensors[other]) == ranks[step]]
        if ranks[step] < 2:
            continue
        begins = ranks[step] not in ranks[:step]
        targets = [VERTEX] if begins else [sensors[one].scalp_position for one in order[:step]]
        assert away(at, targets) <= min(away(other, targets) for other in rest) + 1e-9


def test_it_does_not_depend_on_how_the_sensors_are_listed(magnetometers_only):
    sensors = magnetometers_only.layouts[0].sensors
    shuffled = tuple(sensors[i] for i in np.random.default_rng(0).permutation(len(sensors)))
    names = [sensors[at].name for at in placing_order(sensors, VERTEX)]
    assert names == [shuffled[at].name for at in placing_order(shuffled, VERTEX)]
