"""What one stream learns of itself: what was gathered, proposed and adopted.

Knows when a baseline is proposed and when it is judged by. Must not know detectors' states, alerts
or who hears of a proposal.
"""

from __future__ import annotations

from typing import Any

from monitor import judging, plan_json
from monitor.learning import Learner
from monitor.messages import BaselineMessage
from monitor.pinning import pinned_judgement
from monitor.plan import CharacteristicPlan, Judgement, LearnPlan, Stream
from monitor.proposing import propose
from monitor.solving import UnsolvableError
from monitor.subgroups import Subgroup


class StreamLearning:
    """``proposal`` is the latest, ``adopted`` what the stream is judged by; None where none is."""

    __slots__ = ("_learner", "_plan", "adopted", "proposal")

    def __init__(self, plan: LearnPlan | None) -> None:
        self._start(plan)

    def _start(self, plan: LearnPlan | None) -> None:
        self._plan = plan
        self._learner = None if plan is None else Learner(plan)
        self.proposal: BaselineMessage | None = None
        self.adopted: Judgement | None = None

    @property
    def gathers(self) -> bool:
        """Whether there is more to be learned."""
        return self._learner is not None

    @property
    def told(self) -> str | None:
        """Why it is not judged by what it learns, in words; None where nothing keeps it from that,
        or it was not asked to."""
        if self._learner is not None:
            return self._learner.told
        if self._plan is not None and self._plan.adopt and self.adopted is None:
            return "the detectors cannot be worked out from the baseline it learned"
        if self._plan is not None and self.adopted is None and self.proposal is not None:
            return "a baseline was proposed and waits to be written down, or for adopt: true"
        return None

    def restart(self) -> None:
        """The gauge is another: gather from nothing."""
        if self._learner is not None:
            self._learner.restart()

    def take(self, plan: CharacteristicPlan, stream: Stream, subgroup: Subgroup) -> bool:
        """Gather a subgroup; whether another baseline was adopted by it."""
        learner, learn = self._learner, self._plan
        if learner is None or learn is None or not learner.add(subgroup):
            return False
        proposed = propose(plan, learn, stream, learner.material(stream))
        self.proposal = proposed.message
        if proposed.refused:
            learner.restart()
        if proposed.judgement is None:
            return False
        self._learner = None
        if learn.adopt:
            self.adopted = proposed.judgement
        return learn.adopt

    def reconfigure(self, plan: LearnPlan | None, same_readings: bool) -> None:
        """Go on where as much is to be learned as before, of the same readings."""
        before = self._plan
        if (
            plan is None
            or before is None
            or not same_readings
            or (plan.subgroups, plan.over_at_least) != (before.subgroups, before.over_at_least)
        ):
            self._start(plan)
            return
        self._plan = plan
        if self._learner is None and self.proposal is not None:
            until_now = self.adopted
            self.adopted = self._adoptable(plan, self.proposal, until_now)
            if (self.adopted is None) != (until_now is None):
                self.proposal = {**self.proposal, "adopted": self.adopted is not None}

    def _adoptable(
        self, plan: LearnPlan, learned: BaselineMessage, now: Judgement | None
    ) -> Judgement | None:
        """What a trusted baseline gives under ``plan``, which may be another than it was learned
        under: that asks for it only now, or for detectors that it cannot give."""
        if not plan.adopt:
            return None
        values = learned["mean"], learned["sigma"], learned["sigma_between"]
        try:
            return pinned_judgement(judging.judgement(*values, plan.detectors), now)
        except UnsolvableError:
            return None

    def state(self) -> list[Any]:
        """What is remembered, as JSON values."""
        return [
            None if self._learner is None else self._learner.state(),
            None if self.adopted is None else plan_json.plain(self.adopted),
            self.proposal,
        ]

    def restore(self, state: list[Any]) -> None:
        """Take back what ``state`` gave under the same plan."""
        learner, adopted, self.proposal = state
        if learner is None:
            self._learner = None
        elif self._learner is not None:
            self._learner.restore(learner)
        self.adopted = None if adopted is None else plan_json.restored(adopted)
