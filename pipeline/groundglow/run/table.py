"""Short tables in plain text, which read the same on a terminal, in a mail and in a log."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from groundglow.run.outcome import SceneOutcome


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


def plan_table(plans: Sequence[Mapping[str, object]]) -> str:
    """What would be done for each scene."""
    rows = [["scene", "grid", "band", "blocks", "memory MiB", "disk MiB", "layers"]]
    for plan in plans:
        layers = plan["layers"]
        names = ", ".join(layers) if isinstance(layers, list) else ""
        rows.append(
            [
                *(
                    str(plan[key])
                    for key in ("scene", "grid", "band", "blocks", "peak_memory_mib", "disk_mib")
                ),
                names,
            ]
        )
    return aligned(rows)


def number(value: float | None, digits: int) -> str:
    """A number for a table; a dash where there is none."""
    return "-" if value is None else f"{value:.{digits}f}"
