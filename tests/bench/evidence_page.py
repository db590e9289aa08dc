"""results/evidence.md from the tables that `evidence.py` keeps: the main figures, and what they say in a sentence."""

from __future__ import annotations

import csv
import os
import platform
from pathlib import Path

PAGE = "evidence.md"
Rows = list[dict[str, str]]
GOALS = {
    "curve": "its own goal, information",
    "curve-localisation": "a variant with the other goal, localisation",
    "curve-budget": "a variant with up to 16 contacts, and amplifiers of 8 channels at 40 each",
}


def page(root: Path, briefs: tuple[str, ...], planted: dict[str, float], recorded: float) -> str:
    """The whole page; a brief without kept tables is left out.

    planted: strength -> its size in the simulated recordings, times what the brief assumes; recorded: their seconds.
    """
    machine = f"{os.cpu_count()} cores, {platform.machine()}, Python {platform.python_version()}"
    parts = [
        "# The evidence for the three users' briefs",
        "",
        f"`python tests/bench/evidence.py`, {machine}. Each command in a process of its own, on the layout that",
        "results/ keeps of the brief (`design`). Seconds are by the clock, imports included; where the load before a",
        "command was well above 0 others were using the machine, and the processors' own seconds (of all cores",
        "together) say more. Whole tables: results/<brief>/evidence/. A localisation error is linearised and with the",
        "brief's priors; the template head is an average one, without ears.",
    ]
    for stem in briefs:
        folder = root / "results" / stem / "evidence"
        if (folder / "seconds.csv").exists():
            parts += section(stem, folder, planted, recorded)
    return "\n".join([*parts, ""])


def section(stem: str, folder: Path, planted: dict[str, float], recorded: float) -> list[str]:
    """One brief, as far as its commands have been run."""
    parts = ["", f"## {stem}.toml", "", *table(read(folder, "seconds"), seconds_columns())]

    def there(*names: str) -> bool:
        return all((folder / f"{name}.csv").exists() for name in names)

    if there("layouts", "models"):
        layouts, models = read(folder, "layouts"), read(folder, "models")
        parts += ["", "### Assess", "", assess_sentence(layouts, models), "", *assess_table(layouts), ""]
        parts += models_table(models)
    for name, goal in GOALS.items():
        if there(name):
            rows = read(folder, name)
            parts += ["", f"### Curve: {goal}", "", curve_sentence(rows), "", *curve_table(rows)]
    if there("placement", "expected_loss"):
        placed, losses = read(folder, "placement"), read(folder, "expected_loss")
        parts += ["", "### Placement", "", placement_sentence(placed, losses), "", *placement_table(placed)]
        parts += ["", *loss_table(losses)]
    if there("simulation"):
        fits = read(folder, "simulation")
        parts += ["", "### Simulation", "", simulation_sentence(fits), "", *simulation_table(fits)]
    if there("noise"):
        noise = read(folder, "noise")
        parts += ["", "### Noise from a simulated recording", "", noise_sentence(noise, planted, recorded), ""]
        parts += noise_table(noise)
    return parts


def read(folder: Path, name: str) -> Rows:
    """A kept table as dictionaries."""
    with (folder / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def table(rows: Rows, columns: dict[str, str]) -> list[str]:
    """Markdown of some columns (name -> heading), numbers to four digits."""
    lines = [f"| {' | '.join(columns.values())} |", "|" + "---|" * len(columns)]
    return lines + [f"| {' | '.join(short(row.get(name, '')) for name in columns)} |" for row in rows]


def short(text: str) -> str:
    """A number with four digits; other text as it is, and something visible for nothing."""
    try:
        return f"{float(text):.4g}"
    except ValueError:
        return text.replace("|", "/") or "-"


def unit_of(rows: Rows) -> str:
    """bits or mm."""
    return "bits" if any(name.endswith("_bits") for name in rows[0]) else "mm"


def seconds_columns() -> dict[str, str]:
    """Of the table of times."""
    return {
        "command": "command",
        "seconds": "s by the clock",
        "processor_seconds": "s of the processors",
        "load_before": "load before",
        "date": "date",
    }


def assess_table(rows: Rows) -> list[str]:
    """Given layouts and ceilings."""
    unit = unit_of(rows)
    return table(
        rows,
        {
            "name": "layout",
            "sensors": "sensors",
            f"value_{unit}": unit,
            f"best_found_{unit}": "best found",
            f"bound_{unit}": "bound",
            "percent_of_bound": "% of bound",
            "percent_of_ceiling": "% of ceiling",
        },
    )


def assess_sentence(layouts: Rows, models: Rows) -> str:
    """How the given layouts stand, and what other models make of their order."""
    given = {row["name"]: row for row in layouts if row["row"] == "layout"}
    own, standard = given["design"], given["standard positions given"]
    rows = {row["model"]: row for row in models if row["pairs"]}
    pairs, turned = (sum(int(row[name]) for row in rows.values()) for name in ("pairs", "pairs_reversed"))
    worst = min(float(row["percent_of_designed"]) for row in models if row["layout"] == "design")
    rules = "" if standard["keeps_rules"] == "yes" else " (which break the brief's rules)"
    return (
        f"The design is at {short(own['percent_of_bound'])} % of the bound, standard positions{rules} at "
        f"{short(standard['percent_of_bound'])} %. Under {len(rows)} other models the design keeps at least "
        f"{short(str(worst))} % of what a design made for that model has, and {turned} of {pairs} pairs of layouts "
        "change their order."
    )


def models_table(rows: Rows) -> list[str]:
    """One line a model: the two given layouts and what is designed there."""
    unit, lines = unit_of(rows), []
    for model in dict.fromkeys(row["model"] for row in rows):
        mine = {row["layout"]: row for row in rows if row["model"] == model}
        own, standard = mine["design"], mine["standard positions given"]
        lines.append(
            {
                "model": model,
                "own": own[f"value_{unit}"],
                "standard": standard[f"value_{unit}"],
                "designed": own[f"designed_for_it_{unit}"],
                "bound": own[f"bound_{unit}"],
                "turned": own["pairs_reversed"] and f"{own['pairs_reversed']} of {own['pairs']}",
            }
        )
    return table(
        lines,
        {
            "model": "judged under",
            "own": f"design, {unit}",
            "standard": "standard positions",
            "designed": "designed for it",
            "bound": "bound there",
            "turned": "pairs reversed",
        },
    )


def curve_sentence(rows: Rows) -> str:
    """The knee, and what standard positions and even spreads do against it."""
    by, unit = next(iter(rows[0])), unit_of(rows)
    knee = next((row for row in rows if row["knee"] == "yes"), None)
    widest = max(float(row["gap_percent"]) for row in rows)
    words = f"The bound is never farther than {short(str(widest))} %."
    if knee is None:
        return f"No knee: the curve has too few points. {words}"
    equals = knee["equals_even_spread_of"] or f"more than {knee['even_spread_limit']}"
    return (
        f"The knee is at {by} {short(knee[by])} ({short(knee[f'value_{unit}'])} {unit}, "
        f"{short(knee['percent_of_ceiling'])} % of the ceiling), as good as an even spread of {equals}. {words}"
    )


def curve_table(rows: Rows) -> list[str]:
    """Every point."""
    by, unit = next(iter(rows[0])), unit_of(rows)
    columns = {by: by} | ({"sensors": "sensors"} if by != "sensors" else {})
    return table(
        rows,
        columns
        | {
            f"value_{unit}": unit,
            f"bound_{unit}": "bound",
            "gap_percent": "gap %",
            "percent_of_ceiling": "% of ceiling",
            f"even_spread_{unit}": "even spread",
            f"standard_{unit}": "standard",
            "equals_even_spread_of": "equals even",
            f"next_sensor_{unit}": "next buys",
        },
    )


def placement_sentence(rows: Rows, losses: Rows) -> str:
    """The tightest sensor, and what failures and misplacement cost."""
    room = slide_column(rows)
    told = [row for row in rows if not row[room].startswith(">")]
    one = next(row for row in losses if row["what"] == "failures")
    moved = next(row for row in losses if row["what"] == "misplacement")
    where = "No sensor's slide costs 5 % within what was tried."
    if told:
        first = min(told, key=lambda row: float(row[room]))
        where = f"{first['name']} must be placed most exactly: {short(first[room])} mm in the worst direction cost 5 %."
    return (
        f"{where} One failing sensor costs {short(one['mean_percent'])} % on average, all sensors misplaced by "
        f"{short(moved['shift_mm'])} mm rms along each tangent {short(moved['mean_percent'])} %."
    )


def slide_column(rows: Rows) -> str:
    """The column of the worst slide for 5 %."""
    return next(name for name in rows[0] if name.startswith("slide") and "worst" in name and "5" in name)


def placement_table(rows: Rows) -> list[str]:
    """The five sensors that matter most."""
    unit = unit_of(rows)
    first = sorted(rows, key=lambda row: -float(row[f"lost_without_{unit}"]))[:5]
    return table(
        first,
        {
            "name": "the five that matter most",
            f"lost_without_{unit}": f"lost without it, {unit}",
            "lost_without_percent": "%",
            slide_column(rows): "slide that costs 5 %, mm",
        },
    )


def loss_table(rows: Rows) -> list[str]:
    """Failures and misplacement."""
    unit = unit_of(rows)
    return table(
        rows,
        {
            "what": "what",
            "failing": "failing",
            "shift_mm": "shift mm",
            "tilt_deg": "tilt °",
            f"mean_loss_{unit}": f"mean loss, {unit}",
            f"mean_low_{unit}": "95 % from",
            f"mean_high_{unit}": "to",
            "mean_percent": "%",
            f"worst_loss_{unit}": "largest",
        },
    )


def simulation_sentence(rows: Rows) -> str:
    """Up to which noise each layout's errors follow their bound."""
    told = []
    for layout in dict.fromkeys(row["layout"] for row in rows):
        mine = sorted((row for row in rows if row["layout"] == layout), key=lambda row: float(row["noise_factor"]))
        followed = None
        for row in mine:
            if row["standing"] != "follows":
                break
            followed = row["noise_factor"]
        told.append(f"{layout}: " + ("at none of these" if followed is None else f"up to noise x {short(followed)}"))
    return f"{short(rows[0]['fits'])} fits each. Errors follow the Cramér-Rao bound: {'; '.join(told)}."


def simulation_table(rows: Rows) -> list[str]:
    """All plants together."""
    return table(
        rows,
        {
            "layout": "layout",
            "noise_factor": "noise x",
            "snr": "SNR",
            "rms_mm": "rms error mm",
            "median_mm": "median mm",
            "bound_mm": "bound mm",
            "ratio": "error / bound",
            "standing": "standing",
        },
    )


def noise_sentence(rows: Rows, planted: dict[str, float], recorded: float) -> str:
    """Whether the planted strengths lie in their intervals."""
    called = {
        "contacts": "contact noise",
        "background": "background EEG at 10-20 sites",
        "eyes": "eyes, at Fp1 and Fp2",
    }
    found = []
    for name, factor in planted.items():
        row = next((row for row in rows if row["strength"] == called[name] and row["low"] and row["assumed"]), None)
        if row is not None:
            size = factor * float(row["assumed"])
            inside = "inside" if float(row["low"]) <= size <= float(row["high"]) else "OUTSIDE"
            found.append(f"{called[name]} {size:.4g} {row['unit']} ({inside} its interval)")
    return (
        f"{recorded} s of EEG drawn from the brief's own model, recorded from nobody. Planted: {'; '.join(found)}. "
        "Of 95 % intervals one in twenty misses."
    )


def noise_table(rows: Rows) -> list[str]:
    """Every strength."""
    return table(
        rows,
        {
            "strength": "strength",
            "entry": "of",
            "unit": "unit",
            "assumed": "assumed",
            "value": "now",
            "low": "95 % from",
            "high": "to",
            "status": "status",
        },
    )
