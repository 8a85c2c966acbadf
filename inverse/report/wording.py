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
     "the LED's width and stray paths carry it past the edge; a larger aperture or a wider target takes it in"),
    ("forward", "outside", "forward, but outside the target",
     "the LED's width and stray paths carry it past the edge; a larger aperture or a wider target takes it in"),
    ("back", "back", "backward",
     "reflections at the surfaces send it back past the LED; every uncoated plastic surface reflects a few percent"),
    ("foot", "foot", "out below the foot",
     "it leaves the LED too flat to meet the lens; a foot further below the emitter plane would catch it"),
    ("board", "board", "absorbed in the board",
     "it falls on the board around the LED; the count takes the board as black, a white one returns some"),
    ("material", "material", "absorbed in the material",
     "the plastic swallows it on the way; a thinner lens or a clearer grade loses less"),
    ("absorbed", "material", "absorbed in the material",
     "the plastic swallows it on the way; a thinner lens or a clearer grade loses less"),
    ("bounc", "bouncing", "still bouncing when the count ended",
     "it was trapped by repeated reflection and counts as lost"),
    ("target", "target", "in the target", ""),
)  # fmt: skip
BEYOND_CHANCE = 4  # standard errors; one honest run in 30 000 falls further out on one side
BIGGEST = 3  # losses told in words
WORTH_TELLING = 0.003  # of the emitted flux; smaller losses change nothing a customer would see


def account(name):
    """(kind, words, reason) of a ledger account."""
    plain = name.lower().replace("_", " ")
    for word, kind, words, reason in ACCOUNTS:
        if word in plain:
            return kind, words, reason
    return "other", plain, ""


def ordered(ledger):
    """[(key, kind, words, fraction)]: the target first, then the losses, largest first."""
    rows = [(key, *account(key)[:2], fraction) for key, fraction in ledger.items()]
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
    amount = f"at least {tick(100 * share)}{NO_BREAK}% of the LED's light" if share else "as much of the LED's light as possible"
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
        sentences.append(f"The brief asked for {asked(wanted['original'])}. Physics forbids that.")
        sentences.append(f"The nearest possible brief was designed instead: {asked(wanted)}.")
    elif wanted:
        sentences.append(f"Asked for: {asked(wanted)}.")
    if limit.get("ceiling") is not None:
        sentences.append(f"Physics allows at most {percent(limit['ceiling'])}.")
    if got.get("share") is not None:
        sentence = f"This lens delivers {percent(got['share'], got.get('share_se'))}"
        if got.get("share_of_ceiling") is not None:
            sentence += f", which is {percent(got['share_of_ceiling'])} of that limit"
        sentences.append(sentence + ".")
    return sentences + judgement(result)


def judgement(result):
    """What the exit code means for the reader, as sentences."""
    verdict = result.get("verdict", {})
    code, missing = verdict.get("exit_code"), [m[:1].upper() + m[1:] for m in verdict.get("missing") or ()]
    constraints = result.get("constraints") or []
    if code == 0:
        kept = " and every constraint is met" if constraints else ""
        return [f"The beam is as asked{kept}."] + missing
    if code == 5:
        return ["The two independent ray traces disagree: something is wrong, and no figure here is to be trusted."] + missing
    if code == 130:
        return ["The search was stopped by hand; this is the best lens up to then, verified like any other."] + missing
    if missing:
        return missing
    return [f"The outcome is “{outcome(result)[1].lower()}”."] if verdict else ["No verdict was recorded."]


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
    return f"is {words}" if words.startswith(("absorbed", "still")) else f"goes {words}"


def _room_left(result):
    """How much of the loss is the limit's and how much the lens's."""
    ceiling, share = result.get("limit", {}).get("ceiling"), result.get("got", {}).get("share")
    if ceiling is None or share is None:
        return []
    text = f"The best lens physics allows would still lose {percent(1 - ceiling)}"
    transmission = result["limit"].get("transmission")
    if transmission is not None and transmission >= ceiling:
        text += f", of which {percent(1 - transmission)} is reflection at two uncoated surfaces"
    gap, error = ceiling - share, result["got"].get("share_se") or 0.0
    if gap < -BEYOND_CHANCE * error:
        return ["The share found is above what physics allows: something is wrong, and no figure here is to be trusted."]
    if gap > 0:
        text += f"; the remaining {percent(gap)} is the most that a better shape could win."
    else:
        text += "; this lens is at the limit within its error."
    return [text]


def _active(constraints):
    broken = [c for c in constraints if not c.get("met", True)]
    active = [c for c in constraints if c.get("active") and c.get("met", True)]
    paragraphs = []
    if broken:
        paragraphs.append(f"Not met: {_listed(c['name'] for c in broken)}. The lens as drawn breaks the brief there.")
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
