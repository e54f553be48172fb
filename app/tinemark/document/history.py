"""Undo and redo: sessions are values, so going back is a matter of keeping the ones before."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

from tinemark.document.session import Session

MAX_STEPS = 300


@dataclass(frozen=True)
class Change:
    """One step of work.

    Attributes
    ----------
    label
        What was done, in words that follow "Undo": "pick at 3.449", "note".
    before, after
        The session on both sides of it.
    merge
        Successive changes with the same non-empty text are one step (typing into one field).
    """

    label: str
    before: Session
    after: Session
    merge: str = ""


@dataclass(frozen=True)
class Timeline:
    """The present session, the changes that led to it and those undone (the next to redo last)."""

    present: Session
    done: tuple[Change, ...] = field(default=())
    undone: tuple[Change, ...] = field(default=())

    @property
    def undo_label(self) -> str:
        """What undo would take back; empty when there is nothing."""
        return self.done[-1].label if self.done else ""

    @property
    def redo_label(self) -> str:
        """What redo would do again; empty when there is nothing."""
        return self.undone[-1].label if self.undone else ""


def record(timeline: Timeline, session: Session, label: str, *, merge: str = "") -> Timeline:
    """The timeline after a change. A change that changes nothing is no step."""
    if session == timeline.present:
        return timeline
    change = Change(label, timeline.present, session, merge)
    last = timeline.done[-1] if timeline.done else None
    if merge and last is not None and last.merge == merge and not timeline.undone:
        change = replace(change, before=last.before)
        kept = timeline.done[:-1]
        # Typed and taken back by hand: nothing is left to undo.
        done = kept if change.before == session else (*kept, change)
        return Timeline(session, done)
    return Timeline(session, (*timeline.done, change)[-MAX_STEPS:])


def look(timeline: Timeline, session: Session) -> Timeline:
    """The timeline after a change of the view or the probe, which has its own way back and is no step."""
    return replace(timeline, present=session)


def undo(timeline: Timeline) -> Timeline:
    """The timeline with its last change taken back; the same when there is none.

    The view stays where it is unless the change was one of the diagram.
    """
    if not timeline.done:
        return timeline
    change = timeline.done[-1]
    back = _looking_as(change.before, timeline.present, change)
    return Timeline(back, timeline.done[:-1], (*timeline.undone, change))


def redo(timeline: Timeline) -> Timeline:
    """The timeline with the last undone change done again; the same when there is none."""
    if not timeline.undone:
        return timeline
    change = timeline.undone[-1]
    again = _looking_as(change.after, timeline.present, change)
    return Timeline(again, (*timeline.done, change), timeline.undone[:-1])


def _looking_as(target: Session, present: Session, change: Change) -> Session:
    """`target` seen as `present` is, where both show the same diagram."""

    def diagram(session: Session) -> tuple[str, str, str]:
        return session.system_text, session.parameter, session.observe

    if diagram(change.before) != diagram(change.after) or diagram(target) != diagram(present):
        return target
    return replace(target, view=present.view, history=present.history, probe=present.probe)
