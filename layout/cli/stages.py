"""What each command says it is doing, in order, with the seconds that it takes on the briefs in configs/ on two cores.

Only the proportions matter: `course` scales them to the machine and the brief. Messages that are not listed are shown
all the same; while they last, the time left is known only where they count.
"""

from __future__ import annotations

from dataclasses import replace

from layout.cli.course import Stage

LAY_OUT = (
    Stage("reading the brief", 0.3),
    Stage("loading", 1.5),
    Stage("building the head", 0.3),
    Stage("laying the candidate sites", 1.5),
)
FIELDS = (
    Stage("lead fields of the regions", 2.0),
    Stage("background activity", 3.5),
    Stage("lead fields beside the regions' sources", 10.0, certain=False),
)
OTHER_SCENARIOS = Stage(r"scenario \d+ of", 20.0, FIELDS, certain=False)
FEWEST = Stage(r"\d+ sensors$", 5.0, certain=False)
SEARCH = (
    Stage("greedy start", 0.1),
    Stage("bounding every other layout", 0.3),
    Stage(r"exchange from start \d+ of", 1.5),
    Stage(r"rank-aware bound|rank \d+ of", 0.5),
    Stage(r"proof: \d+ of", 2.5),
    Stage(r"bounding rank \d+ of", 0.6),
)
SEARCH_IF_ANY = tuple(replace(stage, certain=False) for stage in SEARCH)  # none where a layout is given
DESCRIBE = (
    Stage(r"describing rank", 0.2),
    Stage("baselines", 0.3),
    Stage(r"sliding sensors", 20.0, certain=False),
)
DRAW = Stage("drawing", 3.0)
WRITE = (
    Stage("drawing the scalp", 7.0),
    Stage(r"papers for the bench, layout \d+ of", 9.0),
    Stage("drawing cortex and noise", 8.0),
    Stage("shaping helmets", 2.0),
    Stage("making the page", 2.0),
)

CHECK = (*LAY_OUT, FIELDS[1], DRAW)
NOISE = (*LAY_OUT, FIELDS[1])
LEAD_FIELD = (*LAY_OUT, Stage("lead field of all candidates", 10.0), Stage("writing", 1.0))
CURVE_POINTS = (
    Stage(r"(count|budget) \S+, \d+ of", 12.0, SEARCH),
    Stage("looking back", 0.2),
    Stage("all candidates at once", 0.2),
)
MOVED = (
    Stage("lead fields of displaced sensors", 12.0),
    Stage("substitutes", 0.4),
    Stage(r"\d+ sensors failing", 0.6),
)
EVIDENCE = (
    Stage("sensitivity and noise of rank", 3.0),
    *MOVED,
    Stage(r"misplacement \d+ of", 4.0, (Stage("lead fields of layouts", 4.0),)),
    *CURVE_POINTS,
)
FOUND = (*LAY_OUT, *FIELDS, OTHER_SCENARIOS, FEWEST, *SEARCH, *DESCRIBE)
QUICK_DESIGN = (*FOUND, *WRITE)
DESIGN = (*FOUND, *EVIDENCE, *WRITE)
CURVE = (*LAY_OUT, *FIELDS, OTHER_SCENARIOS, *CURVE_POINTS, Stage("drawing", 1.0))
ASSESS = (
    *LAY_OUT,
    *FIELDS,
    OTHER_SCENARIOS,
    Stage(r"layout \d+ of", 5.0, (Stage("judging", 0.1), *SEARCH)),
    Stage("dense caps", 0.3),
    Stage(r"model \d+ of", 60.0, (Stage("under", 5.0), *SEARCH), certain=False),
)
PLACEMENT = (
    *LAY_OUT,
    *FIELDS,
    OTHER_SCENARIOS,
    *SEARCH_IF_ANY,
    *MOVED,
    Stage(r"misplacement \d+ of", 40.0, (Stage("lead fields of layouts", 13.0),)),
)
SIMULATE = (
    *LAY_OUT,
    *FIELDS,
    *SEARCH_IF_ANY,
    Stage("lead fields of the whole brain", 25.0),
    Stage("lead fields beside the plants", 4.0),
    Stage(r"layout \d+ of", 30.0, (Stage("fitting dipoles", 10.0),)),
)
