"""The sentences of the report: what was asked, what physics allows, what came out, what holds it back.

Every number in them comes from ``result`` (the structure of result.json).  Accounts of the ledger
are recognised by a word in their name; an account nobody foresaw is shown under its own name.
"""

from inverse.report.digits import NO_BREAK, decimals, percent, tick

OUTCOMES = {
    0: ("good", "Passed"),
    1: ("bad", "Fault in the tool"),
    2: ("bad", "The brief cannot be used"),
    3: ("bad", "Beyond the limit"),
    4: ("bad", "Missed"),
    5: ("bad", "Do not use this lens"),
    130: ("open", "Stopped before the end"),
}
# word in the account's name -> kind, words for people, why light ends there and what could help;
# the first match counts, so "outside target" is not taken for "target".
ACCOUNTS = (
    ("outside", "outside", "forward, but outside the target",
     "the LED's width and stray paths carry it past the edge; a larger aperture or a wider target helps"),
    ("back", "back", "backward",
     "reflections at the surfaces send it back past the LED; an uncoated surface reflects a few percent"),
    ("foot", "foot", "out below the foot",
     "it leaves the LED too flat to meet the lens; a foot further below the emitter plane would catch it"),
    ("board", "board", "absorbed in the board",
     "it falls on the board around the LED; the count takes the board as black, a white one returns some"),
    ("emitter", "emitter", "absorbed in the LED",
     "surfaces of the lens reflect it back onto the LED; the count takes the LED as black"),
    ("material", "material", "absorbed in the material",
     "the plastic swallows it on the way; a thinner lens or a clearer grade loses less"),
    ("port", "port", "reflected by the port",
     "the window between the lens and the outer medium sends it back; a coated window reflects less"),
    ("numerical", "other", "lost to rounding in the count",
     "a defect in the tool when it is more than a trace"),
    ("bounc", "bouncing", "still bouncing when the count ended",
     "it was trapped by repeated reflection and counts as lost"),
    ("target", "target", "in the target", ""),
)  # fmt: skip
BEYOND_CHANCE = 4  # standard errors; one honest run in 30 000 falls further out on one side
BIGGEST = 3  # losses told in words
ALL = 0.9995  # a share that three digits show as 100 %
WORTH_TELLING = 0.003  # of the emitted flux; smaller losses change nothing a customer would see


def account(name):
    """(kind, words, reason) of a ledger account."""
    plain = name.lower().replace("_", " ")
    for word, kind, words, reason in ACCOUNTS:
        if word in plain:
            return kind, words, reason
    return "other", plain, ""


def ordered(ledger):
    """[(key, kind, words, fraction)]: the target, then the losses, largest first, empty ones left out."""
    rows = [(key, *account(key)[:2], fraction) for key, fraction in ledger.items() if fraction != 0.0]
    return sorted(rows, key=lambda row: (row[1] != "target", -row[3]))


def outcome(result):
    """(tone, word) for the badge; tone is "good", "bad" or "open"."""
    verdict = result.get("verdict", {})
    tone, word = OUTCOMES.get(verdict.get("exit_code"), ("open", "No verdict"))
    own = verdict.get("word")
    return tone, (own[0].upper() + own[1:] if own else word)


def asked(wanted):
    """What the brief asked for, as the object of "asked for"."""
    half, share, distance = wanted.get("half_angle_deg"), wanted.get("share"), wanted.get("distance_mm")
    amount = f"at least {tick(100 * share)}{NO_BREAK}%" if share else "as much as possible"
    amount += " of the LED's light"
    where = f" within ±{decimals(half, 2)}° of the axis" if half else ""
    if wanted.get("kind") == "shape":
        where = " in the given intensity curve" + (f", which ends at ±{decimals(half, 2)}°" if half else "")
    if distance:
        where += f" on a wall {tick(distance)}{NO_BREAK}mm away"
    if wanted.get("medium") and wanted["medium"] != "air":
        where += f", in {wanted['medium']}"
    aperture = wanted.get("aperture_mm")
    return amount + where + (f", from a clear aperture of {tick(aperture)}{NO_BREAK}mm" if aperture else "")


def headline(result):
    """The verdict as sentences (list of str): asked, allowed, got, judged."""
    wanted, limit, got = result.get("asked", {}), result.get("limit", {}), result.get("got", {})
    sentences = []
    if wanted.get("original"):
        original = {**wanted, **wanted["original"]}
        sentences.append(f"The brief asked for {asked(original)}. Physics forbids that.")
        sentences.append(f"The nearest possible brief was designed instead: {asked(wanted)}.")
    elif wanted:
        sentences.append(f"Asked for: {asked(wanted)}.")
    if limit.get("ceiling") is not None:
        sentences.append(_allowed(limit))
    if got.get("share") is not None:
        key, part = part_of_best(result)
        delivered = f"This lens delivers {percent(got['share'], got.get('share_se'))}"
        sentences.append(delivered + (f", which is {percent(part)} of that." if key else "."))
    return sentences + judgement(result)


def _allowed(limit):
    ceiling, losses = limit["ceiling"], limit.get("ceiling_with_losses")
    if losses is None:
        return f"Physics allows at most {percent(ceiling)}."
    if ceiling >= ALL:
        return f"Physics allows all of it but what uncoated surfaces reflect, which leaves {percent(losses)}."
    after = f"{percent(losses)} after the reflection at uncoated surfaces"
    return f"Physics allows at most {percent(ceiling)}, or {after}."


def best(limit):
    """The largest share a real, uncoated lens can reach, or None; losses are counted where they are known."""
    losses = limit.get("ceiling_with_losses")
    return limit.get("ceiling") if losses is None else losses


def part_of_best(result):
    """(key, value) of the share as a part of ``best``; (None, None) when the result has neither figure."""
    got = result.get("got", {})
    losses = result.get("limit", {}).get("ceiling_with_losses") is not None
    key = "share_of_best" if losses else "share_of_ceiling"
    return (f"got.{key}", got[key]) if got.get(key) is not None else (None, None)


def judgement(result):
    """What the exit code means for the reader, as sentences."""
    verdict = result.get("verdict", {})
    code, missing = verdict.get("exit_code"), [sentence(m) for m in verdict.get("missing") or ()]
    constraints = result.get("constraints") or []
    if code == 0:
        kept = " and every constraint is met" if constraints else ""
        return [f"The beam is as asked{kept}."] + missing
    if code == 5:
        return ["Something is wrong with this run, and no figure here is to be trusted."] + missing
    if code == 130:
        return ["The search was stopped by hand; this is the best lens so far, verified as usual."] + missing
    if missing:
        return missing
    return [f"The outcome is “{outcome(result)[1].lower()}”."] if verdict else ["No verdict was recorded."]


def sentence(text):
    """``text`` with a capital and a full stop."""
    return text[:1].upper() + text[1:] + ("" if text.endswith((".", "!", "?")) else ".")


def holds_back(result):
    """What keeps the share from 100 %: paragraphs computed from the ledger, the limit and the constraints."""
    ledger = result.get("ledger") or {}
    rows = ordered(ledger)
    lost = [row for row in rows if row[1] != "target"]
    paragraphs = []
    if lost:
        total = sum(row[3] for row in lost)
        told = [row for row in lost if row[3] >= WORTH_TELLING][:BIGGEST]
        text = f"Of the light the LED emits, {percent(total)} misses the target."
        for i, (key, _, words, fraction) in enumerate(told):
            reason = account(key)[2]
            lead = "The largest part" if i == 0 else "Next"
            text += f" {lead}: {percent(fraction)} {_goes(words)}" + (f" ({reason})." if reason else ".")
        paragraphs.append(text)
    paragraphs += _room_left(result) + _active(result.get("constraints") or [])
    return paragraphs


def _goes(words):
    return f"is {words}" if words.startswith(("absorbed", "still", "reflected", "lost")) else f"goes {words}"


def _room_left(result):
    """How much of the loss is the limit's and how much the lens's."""
    limit, share = result.get("limit", {}), result.get("got", {}).get("share")
    possible = best(limit)
    if possible is None or share is None:
        return []
    text = f"The best lens physics allows would still lose {percent(1 - possible)}"
    transmission = limit.get("transmission")
    if transmission is not None and transmission >= possible:
        text += f", of which {percent(1 - transmission)} is reflection at uncoated surfaces"
    gap, error = possible - share, result["got"].get("share_se") or 0.0
    if limit.get("ceiling") is not None and share > limit["ceiling"] + BEYOND_CHANCE * error:
        return ["The share found is above what physics allows: something is wrong, trust no figure here."]
    if gap > 0:
        text += f"; the remaining {percent(gap)} is the most that a better shape could win."
    else:
        text += "; this lens has reached that."
    return [text]


def _active(constraints):
    broken = [c for c in constraints if not c.get("met", True)]
    active = [c for c in constraints if c.get("active") and c.get("met", True)]
    paragraphs = []
    if broken:
        names = _listed(c["name"] for c in broken)
        paragraphs.append(f"Not met: {names}. The lens as drawn breaks the brief there.")
    if active:
        verb = "is" if len(active) == 1 else "are"
        paragraphs.append(
            f"Constraints at their bound: {_listed(c['name'] for c in active)} {verb} pressing on the shape. "
            "If one can be relaxed, start there."
        )
    return paragraphs


def _listed(names):
    names = list(names)
    return names[0] if len(names) == 1 else ", ".join(names[:-1]) + " and " + names[-1]
