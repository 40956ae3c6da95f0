"""What a reader must know before using a map; shown in the Item, the preview and the README."""

from __future__ import annotations

CAUTIONS = (
    "Surface (skin) temperature is not air temperature: in sunshine the ground can be far warmer.",
    "Bare metal shows mostly the reflected sky; its temperature is uncertain even where a number is given.",
    "Pixels at the edges of clouds are often too cold without being flagged.",
    "Temperature and flux vary with the view angle over relief, buildings and tall vegetation.",
    "Not for life-safety, fire-fighting, clinical or structural decisions: local codes, heat-health guidance "
    "and licensed practice come first.",
)

SHORT_CAUTION = (
    "Skin temperature, not air temperature. Doubtful over bare metal and at cloud edges; varies with view "
    "angle. Not for life-safety, fire-fighting, clinical or structural decisions."
)
