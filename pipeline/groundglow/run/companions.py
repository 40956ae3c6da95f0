"""Files beside the layers."""
from __future__ import annotations
def write_companions(plan, folder, summaries, outcome):
    pass
