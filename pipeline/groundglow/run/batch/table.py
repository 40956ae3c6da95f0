"""Short tables in plain text, which read the same on a terminal, in a mail and in a log."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from groundglow.run.making.outcome import SceneOutcome

_MOST_ROWS = 200


def aligned(rows: Sequence[Sequence[str]]) -> str:
    """Rows as columns of even width; the first row is the heading."""
    widths = [max(len(cell) for cell in column) for column in zip(*rows, strict=True)]
    lines = [
        "  ".join(cell.ljust(width) for cell, width in zip(row, widths, strict=True)).rstrip() for row in rows
    ]
    return "\n".join([lines[0], "  ".join("-" * width for width in widths), *lines[1:]])


def outcome_table(outcomes: Sequence[SceneOutcome], seconds: float) -> str:
    """Scene, grid, valid share, temperatures, flux and time of each scene."""
    heading = [
        "scene",
        "status",
        "grid",
        "valid %",
        "min K",
        "median K",
        "max K",
        "emitted flux W m-2",
        "seconds",
    ]
    rows = [heading]
    for outcome in outcomes:
        t = outcome.temperature
        rows.append(
            [
                outcome.name,
                outcome.status,
                outcome.grid or "-",
                number(outcome.valid_percent, 1),
                number(t.get("minimum"), 1),
                number(t.get("median"), 1),
                number(t.get("maximum"), 1),
                number(outcome.mean_emitted_flux, 1),
                number(outcome.seconds, 1),
            ]
        )
    lines = [aligned(rows)]
    for outcome in outcomes:
        lines += [f"{outcome.name}: {note}" for note in (outcome.reason, *outcome.notes) if note]
        for layer, error in outcome.reference.items():
            lines.append(
                f"{outcome.name}: {layer} less its known values: mean {error.bias:+.3f}, "
                f"standard deviation {error.standard_deviation:.3f}, "
                f"root mean square {error.root_mean_square:.3f} over {error.count} clear pixels"
            )
    if len(outcomes) > 1:
        lines.append(f"{len(outcomes)} scenes in {seconds:.1f} s")
    return "\n".join(lines)


def batch_plan_table(planned: Mapping[str, Any]) -> str:
    """What would be done for each scene, and why."""
    rows = [["scene", "state", "why", "grid", "blocks", "memory MiB", "disk MiB"]]
    keys = ("scene", "state", "why", "grid", "blocks", "peak_memory_mib", "disk_mib")
    shown = [scene for scene in planned["scenes"] if scene["state"] != "not looked at"]
    rows += [[str(scene.get(key, "-")) or "-" for key in keys] for scene in shown[:_MOST_ROWS]]
    lines = [aligned(rows)] if shown else []
    if len(shown) > _MOST_ROWS:
        lines.append(f"and {len(shown) - _MOST_ROWS} more (all of them with --json)")
    counts = ", ".join(f"{count} {state}" for state, count in planned["counts"].items())
    lines.append(f"{len(planned['scenes'])} scenes: {counts or 'none is wanted'}")
    layers = next((scene["layers"] for scene in shown if "layers" in scene), None)
    if layers is not None:
        lines.append(f"layers: {', '.join(layers)}")
    guess = planned["estimate"]
    lines.append(
        f"about {_duration(guess['seconds'])}, {guess['peak_memory_mib']} MiB of memory and {guess['disk_mib']} MiB "
        f"of disk on {guess['workers']} workers ({guess['worker_seconds_per_megapixel']:g} worker seconds a megapixel: "
        f"{guess['constant_from']})"
    )
    return "\n".join(lines)


def _duration(seconds: float) -> str:
    if seconds < 120.0:
        return f"{seconds:.0f} s"
    return f"{seconds / 60.0:.0f} min" if seconds < 7200.0 else f"{seconds / 3600.0:.1f} h"


def number(value: float | None, digits: int) -> str:
    """A number for a table; a dash where there is none."""
    return "-" if value is None else f"{value:.{digits}f}"
