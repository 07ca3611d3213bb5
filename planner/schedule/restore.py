"""A re-plan's contacts put back to the times they had, where that breaks nothing: a station's calendar then stays."""

from collections.abc import Callable, Collection, Iterable
from dataclasses import replace

from planner.mission.contacts import Session
from planner.schedule.flown import Flown

Move = tuple[Session, Session]  # as planned anew, as it was
SAME_S = 1e-3  # files state times to the millisecond


def put_back(
    flown: Flown, previous: Iterable[Session], is_good: Callable[[Flown], bool], fixed: Collection[Session] = ()
) -> Flown:
    """The same contacts, those that moved put back to previous times as far as `is_good` of the whole; not the `fixed`.

    All at once where that is good, else half by half, so that a few that must move do not cost the others; those that
    lose the least time on air come first.
    """
    old = {(session.pass_id, session.mode): session for session in previous}
    pairs = [(session, old.get((session.pass_id, session.mode), session)) for session in flown.sessions]
    moves = [pair for pair in pairs if has_moved(*pair) and pair[0] not in fixed]
    return _put_back(flown, sorted(moves, key=lambda pair: pair[0].duration_s - pair[1].duration_s), is_good)


def has_moved(new: Session, before: Session) -> bool:
    """Whether a contact's times differ by more than how files state them."""
    return max(abs(new.tx_on_s - before.tx_on_s), abs(new.tx_off_s - before.tx_off_s)) > SAME_S


def _put_back(flown: Flown, moves: list[Move], is_good: Callable[[Flown], bool]) -> Flown:
    if not moves:
        return flown
    back = dict(moves)
    trial = replace(flown, sessions=tuple(sorted(back.get(session, session) for session in flown.sessions)))
    if is_good(trial):
        return trial
    if len(moves) > 1:
        half = len(moves) // 2
        for part in (moves[:half], moves[half:]):
            flown = _put_back(flown, part, is_good)
    return flown
