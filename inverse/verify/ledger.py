"""Book-keeping: the account each part of the light ends in, and the road it took, in words.

Every emitted fraction ends in exactly one account, so the accounts sum to 1.  A road is the
sequence of (curve, what happened there); what happened is ``THROUGH`` (transmitted), ``PART``
(Fresnel reflection) or ``TOTAL`` (total reflection).  Three roads are designed for,

    centre lens → exit ,    pocket wall → flank → exit ,    pocket wall → exit ,

where *exit* is the exit face, exit ring or exit disc, and the flank may reflect totally or in
part.  All other roads are stray and are named up to their first departure from a designed one.

While flying, a road is one integer: digits 1 + 3 curve + happening in base 1 + 3 curves, first
event lowest; only the first ``KEPT`` events are written down.
"""

import numpy as np

ACCOUNTS = (
    "in target",
    "forward outside target",
    "backward",
    "below the foot",
    "absorbed in the board",
    "absorbed in the emitter",
    "absorbed in the material",
    "reflected by the port",
    "still bouncing",
    "lost numerically",
)
THROUGH, PART, TOTAL = 0, 1, 2
KEPT = 8  # the longest designed road has three events, so every stray one shows within eight

ENTRANCES = ("centre lens", "pocket wall")
EXITS = ("exit face", "exit ring", "exit disc")
DESIGNED = ("centre lens → exit", "pocket wall → flank → exit", "pocket wall → exit")
BARE, MISSED = "no lens", "under the foot"


class Road:
    """Writes and reads the integers; ``names`` are those of the section's curves."""

    def __init__(self, names):
        self.names = tuple(names)
        self.base = 1 + 3 * len(self.names)
        if self.base**KEPT >= 2**63:
            raise ValueError(f"{len(self.names)} curves are too many to keep roads apart; at most 77")
        self.place = self.base ** np.arange(KEPT + 1)
        self.place[KEPT] = 0  # later events are not written

    def after(self, code, event, curve, happening):
        """``code`` (k,) with event number ``event`` added: ``curve`` and ``happening`` (k,)."""
        return code + (1 + 3 * curve + happening) * self.place[min(event, KEPT)]

    def events(self, code):
        """[(curve name, happening), ...] of one integer."""
        out, rest = [], int(code)
        while rest:
            rest, digit = divmod(rest, self.base)
            out.append((self.names[(digit - 1) // 3], (digit - 1) % 3))
        return out

    def words(self, code):
        """The name of the road; one of ``DESIGNED`` exactly when it is as designed."""
        events = self.events(code)
        return road_words(events) if self.names else BARE


def road_words(events):
    """Name of the road [(curve name, happening), ...]; pure function, all rules in one place."""
    if not events:
        return MISSED
    (entrance, happening), rest = events[0], events[1:]
    if happening != THROUGH:
        return f"reflected off the {entrance}"
    if entrance not in ENTRANCES:
        return f"in through the {entrance}"
    words, out = [entrance], False
    for curve, happening in rest:
        if out:  # it had left and met the body again
            words.append("back in")
            break
        if curve in EXITS and happening == THROUGH:
            words.append("exit")
            out = True
        elif curve == "flank" and happening != THROUGH and words[-1] != "flank":
            words.append("flank")
        else:
            words.append(_departure(curve, happening))
            break
    return " → ".join(words)


def _departure(curve, happening):
    if curve in EXITS:
        return "total reflection at the exit" if happening == TOTAL else "reflection at the exit"
    if curve == "flank":
        return "flank leak" if happening == THROUGH else "flank again"
    if curve in ENTRANCES:
        return f"back to the {curve}"
    return f"through the {curve}" if happening == THROUGH else f"reflection at the {curve}"
