"""How far a command has come and how long it still takes, told from what it says it is doing.

A command has stages, each with the seconds it takes on the briefs in configs/; how fast this run is by comparison
scales those ahead. Where a message counts ("rank 2 of 3"), its own steps are timed instead. Where neither helps, the
time left is unknown, and None says so: a number that is made up is worse than none.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from threading import Lock

COUNT = re.compile(r"(.*?\b(\d{1,9}) of (?:at most )?(\d{1,9})\b[^:]*)(?:: (.*))?$", re.DOTALL)
DIGITS = re.compile(r"\d+")
TRUST = 0.05  # the stages' seconds weigh like this share of them already run at just that pace
LATE = 3.0  # beyond this multiple of what was expected nothing is known any more
SHORT = 2.0  # s: so long a stage may take before it counts as late, whatever was expected
NEARLY_DONE = 0.99  # the fullest that a bar is before the end


@dataclass(frozen=True)
class Stage:
    """A part of a command.

    says: pattern that its messages begin with. seconds: what it takes on the shipped briefs. steps: the parts of each
    counted step, whose messages stand behind a colon ("count 8, 2 of 5: rank 1 of 1"). certain: False for what some
    briefs leave out: it is not expected before it has begun.
    """

    says: str
    seconds: float
    steps: tuple[Stage, ...] = ()
    certain: bool = True


class Course:
    """The way through some stages, in their order; a message of an earlier stage changes nothing. Times in seconds."""

    def __init__(self, stages: Sequence[Stage], now: float, pace: float = 1.0) -> None:
        self._stages, self._place = tuple(stages), -1
        self._part: _Part | None = None
        trust = TRUST * sum(stage.seconds for stage in stages)
        self._taken, self._expected = pace * trust, trust
        self._pace_before = pace
        self._began = now

    @property
    def pace(self) -> float:
        """Seconds that this run takes for one second of the stages."""
        return self._taken / self._expected if self._expected else self._pace_before

    def say(self, doing: str, now: float) -> None:
        """Take a message."""
        fitting = [place for place, stage in enumerate(self._stages) if re.match(stage.says, doing)]
        later = [place for place in fitting if place >= max(self._place, 0)]
        if fitting and not later:
            return
        place = later[0] if later else None
        if self._part is None or not self._part.goes_on(place, doing):
            self._leave(now)
            self._part = _Part(place, doing, None if place is None else self._stages[place], now)
            self._place = self._place if place is None else place
        self._part.say(doing, now, self.pace)

    def _leave(self, now: float) -> None:
        if self._part is not None and self._part.stage is not None:
            self._taken += now - self._part.began
            self._expected += self._part.stage.seconds

    def elapsed(self, now: float) -> float:
        """Seconds since the start."""
        return now - self._began

    def left(self, now: float) -> float | None:
        """Seconds to the end; None where they cannot be told."""
        own = None if self._part is None else self._part.left(now, self.pace)
        if own is None:
            return None
        return own + self.pace * sum(stage.seconds for stage in self._stages[self._place + 1 :] if stage.certain)


class _Part:
    """A stage under way, or something that no stage foresees (stage is None)."""

    def __init__(self, place: int | None, doing: str, stage: Stage | None, now: float) -> None:
        self._place, self._words, self.stage, self.began = place, _words(doing), stage, now
        self._first: int | None = None
        self._number = self._last = 0
        self._jump = 1  # from one message to the next
        self._step_began = now
        self._within: Course | None = None

    def goes_on(self, place: int | None, doing: str) -> bool:
        """Whether a message is of this very part."""
        return place == self._place and (place is not None or _words(doing) == self._words)

    def say(self, doing: str, now: float, pace: float) -> None:
        """Take a message of this part."""
        counted = COUNT.match(doing)
        if counted is None:
            return
        number, last = int(counted[2]), int(counted[3])
        if number > last or (self._first is not None and (number < self._number or last != self._last)):
            return
        if self._first is None:
            self._first = self._number = number
            self._last, self._step_began = last, now
        elif number > self._number:
            self._jump, self._number, self._step_began, self._within = number - self._number, number, now, None
        if counted[4] is not None:
            if self._within is None:
                self._within = self._course_of_step(pace)
            self._within.say(counted[4], now)

    def _course_of_step(self, pace: float) -> Course:
        """The course of a step that begins, at the pace that makes it as long as the steps before it."""
        stages = self.stage.steps if self.stage else ()
        whole, done = sum(stage.seconds for stage in stages if stage.certain), self._number - self._first
        if whole and done:
            pace = (self._step_began - self.began) / done / whole
        return Course(stages, self._step_began, pace)

    def left(self, now: float, pace: float) -> float | None:
        """Seconds to the end of this part."""
        expected = None if self.stage is None else self.stage.seconds * pace
        here = None if self._within is None else self._within.left(now)
        done = 0 if self._first is None else self._number - self._first
        if not done and here is None:
            return _rest(expected, now - self.began)
        # "0 of 40" counts what is done, "1 of 3" what is under way.
        steps = self._last - self._first + (1 if self._first else 0)
        jump = min(self._jump, steps - done)
        each = (self._step_began - self.began) / done if done else self._within.elapsed(now) + here
        if here is None:
            here = _rest(jump * each, now - self._step_began)
        return None if here is None else here + (steps - done - jump) * each


def _words(doing: str) -> str:
    return DIGITS.sub("", doing.split(":")[0])


def _rest(expected: float | None, elapsed: float) -> float | None:
    """What is left of something; what takes longer than expected is given a little more, and then up."""
    if expected is None or elapsed > LATE * max(expected, SHORT):
        return None
    return expected - elapsed if elapsed < expected else elapsed / 4


class Meter:
    """A course as a bar that never runs back; one thread may take the messages while another draws."""

    def __init__(self, stages: Sequence[Stage], now: float) -> None:
        self._course, self._fullest, self._lock = Course(stages, now), 0.0, Lock()

    def say(self, doing: str, now: float) -> None:
        """Take a message."""
        with self._lock:
            self._course.say(doing, now)

    def left(self, now: float) -> float | None:
        """Seconds to the end; None where they cannot be told."""
        with self._lock:
            return self._course.left(now)

    def share(self, now: float) -> float:
        """How much of the whole is done, from 0 to less than 1."""
        left, elapsed = self.left(now), self._course.elapsed(now)
        if left is not None and elapsed + left > 0:
            self._fullest = max(self._fullest, min(elapsed / (elapsed + left), NEARLY_DONE))
        return self._fullest


def in_words(left: float | None) -> str:
    """The time left, no more exact than it is known; nothing where it is not known."""
    if left is None:
        return ""
    if left < 10:
        return "a few seconds left"
    if left < 100:
        return f"about {10 * round(left / 10)} s left"
    minutes = round(left / 60)
    return f"about {minutes} min left" if minutes < 120 else f"about {round(minutes / 60)} h left"
