"""Quality rules as people write them, in scene and sensor files."""

from __future__ import annotations

from pydantic import Field, model_validator

from groundglow.documents import Document
from groundglow.errors import ConfigError
from groundglow.scene.quality import QualityRule


class RuleDocument(Document):
    """One rule: when a word of the quality raster sets a flag."""

    flag: str = Field(description="Name of the flag of the quality layer that is set.")
    bits: tuple[int, ...] = Field(
        (), description="The flag is set where any of these bits is set (0 is the lowest)."
    )
    field: tuple[int, int] | None = Field(
        None, description="First bit and number of bits of a field in the word."
    )
    equals: tuple[int, ...] = Field(
        (), description="The flag is set where the field holds one of these numbers."
    )
    values: tuple[int, ...] = Field(
        (), description="The flag is set where the whole word is one of these numbers."
    )

    @model_validator(mode="after")
    def _makes_sense(self) -> RuleDocument:
        try:
            self.rule()
        except ConfigError as error:
            raise ValueError(error.what) from error
        return self

    def rule(self) -> QualityRule:
        """The rule that this document states."""
        return QualityRule(self.flag, self.bits, self.field, self.equals, self.values)
