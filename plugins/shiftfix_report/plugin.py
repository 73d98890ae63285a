"""Entry point `report`: products for people and machines."""

from __future__ import annotations

from dataclasses import dataclass

from shiftfix.api import DefinitionError, NodeSpec, Port, Problem, Solution, hookimpl, param


@dataclass(frozen=True)
class TextParams:
    """Parameters of `report.text`."""

    name: str = param("file name in the run folder", default="report.txt")


@dataclass(frozen=True)
class ResidualsParams:
    """Parameters of `report.residuals`."""

    name: str = param("file name in the run folder", default="residuals.csv")


def _checked(name: str, context) -> str:
    """Return the file name of a product; the run folder holds it, so it names no other place."""
    if not name or name.startswith((".", "/")) or ".." in name.split("/") or "\\" in name:
        raise DefinitionError(
            Problem(
                f"nodes.{context.node}.params.name",
                "not the name of a file in the run folder",
                found=name,
                allowed="a name such as report.txt, or folder/report.txt",
            )
        )
    return name


def _text(inputs, params, context):
    from shiftfix_report.text import report_text

    context.write(_checked(params.name, context), report_text(inputs["solution"], context.title, context.emitter_classes))
    return {}


def _residuals(inputs, params, context):
    from shiftfix_report.residuals import residuals_csv

    context.write(_checked(params.name, context), residuals_csv(inputs["solution"]))
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
