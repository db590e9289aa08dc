"""Results on the template head with layouts made up for the placement sheet: real sites, no lead fields."""

from dataclasses import replace
from functools import cache

import numpy as np
from made_result import _rows, make_result
from studies import BAND, HANDS, TEMPLATE, coils, cups, study_of

from layout.outputs.result import DesignResult

CUPS = (TEMPLATE + 'source_mesh = "coarse"\n', HANDS, cups(128, 'family = "10-5"'), BAND)
COILS = (
    TEMPLATE + 'source_mesh = "coarse"\n',
    HANDS,
    coils(20, "grid_mm = 24", 'axes = "two_axis"\nhair_mm = 2\n'),
    BAND,
)


@cache
def sheet_result(count: int, tables: tuple[str, ...] = CUPS, seed: int = 1) -> DesignResult:
    """One layout of `count` sensors drawn by chance from the candidates of these tables, at different sites."""
    study, made = study_of(*tables), make_result("electrode")
    at_site = np.unique(study.candidates.site, return_index=True)[1]
    chosen = tuple(int(one) for one in np.sort(np.random.default_rng(seed).permutation(at_site)[:count]))
    rows = _rows(study.candidates, chosen, study.brief.stock)
    layout = replace(made.layouts[0], sensors=rows, chosen=chosen)
    return replace(
        made, brief=study.brief, candidates=study.candidates, head=study.head, regions=study.regions, layouts=(layout,)
    )
