"""Answers asked again with only some of the edits made, of one order; each is asked once and kept."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction

from generator.findings.ask import Asking, run
from generator.history.questions import NO_ANSWER, NO_BOUND, NOT_KNOWN, Answer, ask_again
from generator.history.records import Edit
from generator.history.relevance import Question, Relevance
from generator.history.systems import Subset, Systems
from generator.intake.records import Campaign

__all__ = ["NOT_KNOWN", "NO_ANSWER", "NO_BOUND", "Answer", "Question", "Replay"]


@dataclass(slots=True)
class Replay:
    """One order over the subsets of the edits from one campaign to another; every answer is kept.

    ``order`` is its name in the newer campaign, ``was`` in the older; ``asked`` counts replays.
    """

    old: Campaign
    new: Campaign
    edits: Sequence[Edit]
    order: str
    was: str
    asked: int = 0
    _relevance: Relevance = field(init=False)
    _systems: Systems = field(init=False)
    _answers: dict[tuple[Question, Subset], Answer] = field(default_factory=dict)

    def __post_init__(self) -> None:
        """Find out which components the order's limits need, before and after."""
        self._relevance = Relevance.of(self.old, self.new, self.was, self.order)
        self._systems = Systems(self.old, self.new, self.edits, self._relevance.names, self._relevance.needs)

    def relevant(self, question: Question) -> tuple[int, ...]:
        """Positions of the edits that can matter to the question."""
        return tuple(
            position for position, edit in enumerate(self.edits) if self._relevance.can_matter(edit.cells, question)
        )

    def knows(self, question: Question, subset: Subset) -> bool:
        """Whether this was asked before."""
        return (question, subset) in self._answers

    def ask(self, question: Question, subset: Subset) -> Asking[None]:
        """Ask the question with these edits made, and keep the answer."""
        if not self.knows(question, subset):
            self.asked += 1
            self._answers[question, subset] = yield from ask_again(question, self._systems.of(subset))

    def answer(self, question: Question, subset: Iterable[int]) -> Answer:
        """The answer with these edits made; one that is not known is asked on its own."""
        key = frozenset(subset)
        if not self.knows(question, key):
            run(self.ask(question, key))
        return self._answers[question, key]

    def verdict(self, subset: Iterable[int]) -> str:
        """The verdict with these edits made; ``NO_ANSWER`` where the order has a problem or is not there."""
        return str(self.answer("verdict", subset))

    def number(self, question: Question, subset: Iterable[int]) -> Fraction | None:
        """The answer to a question after a number with these edits made; None where there is none."""
        answer = self.answer(question, subset)
        return answer if isinstance(answer, Fraction) else None
