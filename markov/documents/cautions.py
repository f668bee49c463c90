"""The cautions of a report: what is not in its numbers, and who decides."""

from __future__ import annotations

from collections.abc import Iterator

from markov.documents.cells import counted
from markov.documents.tree import Block, Items, Paragraph, Section, Span, plain
from markov.model import Model
from markov.output.wording import CAUTIONS
from markov.results import Solution


def cautions_section(model: Model, solution: Solution) -> Section:
    """Return the section of cautions."""
    blocks: list[Block] = [Paragraph(plain(" ".join(caution.split())), note=True) for caution in CAUTIONS]
    told = tuple(plain(each) for each in _of_this_plant(model, solution))
    if told:
        blocks.append(Items(told))
    if solution.warnings:
        blocks.append(Paragraph(plain("Warnings about this spec:")))
        blocks.append(Items(tuple(plain(warning) for warning in solution.warnings), numbered=True))
    blocks.append(
        Paragraph(
            (
                Span("This report stands for the spec with the SHA-256 "),
                Span(solution.sha256, "code"),
                Span(
                    f" as solved by markov {solution.version}, and for no other. A change of the spec changes its hash."
                ),
            )
        )
    )
    return Section("Cautions", tuple(blocks), "cautions")


def _of_this_plant(model: Model, solution: Solution) -> Iterator[str]:
    lacking = sum(parameter.source is None for parameter in model.parameters.values())
    if lacking:
        rest = "rests" if lacking == 1 else "rest"
        yield f"{counted(lacking, 'parameter')} {rest} on no source that the spec names."
    several = any(group.size > group.required for group in model.groups.values())
    if several and not model.common_causes:
        yield (
            "No common cause is modelled although units stand in for each other. Shared design, place, supply, "
            "maintenance and people make several fail at once more often than chance does."
        )
    if model.explicit:
        yield "The chain is written by hand; whether it describes the plant, nobody here has checked."
    if any(result.value is not None and not result.is_proven for result in solution.results):
        yield "Some results are estimates without a proven bound; they are marked."
    open_ = sum(target.verdict == "undecided" for target in solution.targets)
    if open_:
        yield f"{counted(open_, 'requirement')} could not be decided: treat as not met."
    yield "What a part of the plant does to others beyond its function (fire, flooding, missiles) is not in the model."
