"""A comparison on the terminal."""

from __future__ import annotations

from fieldgen.comparing.comparison import Comparison
from fieldgen.products.metadata import CAUTION
from fieldgen.readers.records import Rejections
from fieldgen.scoring.summary import figure_table, format_period
from fieldgen.text_table import render

EXAMPLES_SHOWN = 3
"""Rejected lines named one by one."""


def format_comparison(comparison: Comparison) -> str:
    """Summary of a comparison."""
    kind = "soundings" if comparison.is_soundings else "values"
    counts = ", ".join(f"{count} {outcome}" for outcome, count in comparison.counts.items())
    return "\n".join(
        [
            f"{comparison.network}, {format_period(*comparison.period)}",
            f"{len(comparison.observations)} {kind} of {comparison.truth_file}: {counts}",
            *_format_rejections(comparison.rejections),
            "errors in kg m-2 are the field less the observation, at the observation's height\n",
            f"{render(figure_table('observations', comparison.groups()))}\n",
            CAUTION,
        ]
    )


def _format_rejections(rejections: Rejections) -> list[str]:
    lines = [f"rejected  {count} x {reason}" for (_, reason), count in rejections.counts.items()]
    return lines + [f"          {example}" for example in rejections.examples[:EXAMPLES_SHOWN]]
