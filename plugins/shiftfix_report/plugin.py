"""Entry point `report`: products for people and machines."""

from __future__ import annotations

from dataclasses import dataclass

from shiftfix.api import NodeSpec, Port, Solution, hookimpl, param


@dataclass(frozen=True)
class TextParams:
    """Parameters of `report.text`."""

    name: str = param("file name in the run folder", default="report.txt")


@dataclass(frozen=True)
class ResidualsParams:
    """Parameters of `report.residuals`."""

    name: str = param("file name in the run folder", default="residuals.csv")


def _text(inputs, params, context):
    from shiftfix_report.text import report_text

    context.write(params.name, report_text(inputs["solution"], context.title, context.emitter_classes))
    return {}


def _residuals(inputs, params, context):
    from shiftfix_report.residuals import residuals_csv

    context.write(params.name, residuals_csv(inputs["solution"]))
    return {}


@hookimpl
def shiftfix_nodes():
    """Return the nodes `text` and `residuals`."""
    return (
        NodeSpec(
            name="text",
            summary="report as plain text: verdict, position, what else fits, stations, budget, cautions",
            function=_text,
            inputs={"solution": Port(Solution, "answer to report")},
            params=TextParams,
        ),
        NodeSpec(
            name="residuals",
            summary="residual of every row as CSV, used or not, with file and line",
            function=_residuals,
            inputs={"solution": Port(Solution, "answer to report")},
            params=ResidualsParams,
        ),
    )
