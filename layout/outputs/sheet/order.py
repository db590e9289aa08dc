"""In which order sensors are placed on a head."""

from __future__ import annotations

import numpy as np

from layout.outputs.result import SensorRow

ORDER_RULE = (
    "Reference and ground first, electrodes before sensors in housings; of each the one nearest to the vertex (Cz) "
    "first, and from there on always the sensor nearest to one already placed."
)


def placing_order(sensors: tuple[SensorRow, ...], vertex: np.ndarray) -> tuple[int, ...]:
    """Rows of `sensors` in the order of placing, see ORDER_RULE; straight distances decide, then the lower number.

    vertex (3,) [m]: Cz.
    """
    places = np.array([row.scalp_position for row in sensors])
    apart = np.linalg.norm(places[:, None] - places[None], axis=2)
    first = [i for i, row in enumerate(sensors) if row.role == "reference"]
    order = first + [i for i, row in enumerate(sensors) if row.role == "ground"]
    for housed in (False, True):
        left = [i for i, row in enumerate(sensors) if (row.kind_type != "electrode") == housed and i not in order]
        if left:
            to_vertex = np.linalg.norm(places[left] - vertex, axis=1)
            order.append(left.pop(int(np.argmin(to_vertex.round(9)))))
        while left:
            nearest = apart[np.ix_(left, order)].min(axis=1).round(9)
            order.append(left.pop(int(np.argmin(nearest))))
    return tuple(order)
