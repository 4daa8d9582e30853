"""Simulated people: one who goes through whole items, one who rules rightly, and one who confirms everything."""

import trial

DRAWN_AT_ONCE = 500
EDITOR_FLOOR = 0.2


def draw(connection, wanted, seed, taken):
    """Ids of `wanted` filed items that the daemon draws at random, none of those `taken`, which grow by them."""
    drawn = []
    while len(drawn) < wanted:
        most = min(wanted - len(drawn), DRAWN_AT_ONCE)
        ids = connection.call("desk.sample", {"most": most, "seed": seed + len(taken)})["items"]
        fresh = [identity for identity in ids if identity not in taken]
        if not fresh:
            raise trial.TrialError(f"desk.sample drew none of the items that are left ({len(drawn)} of {wanted})")
        drawn += fresh
        taken.update(fresh)
    return drawn


def check(connection, wanted, seed, complete, taken):
    """Checks `wanted` random items: `complete` gives an item's complete list by id. Waits until it is learned."""
    drawn = draw(connection, wanted, seed, taken)
    requests = ({"id": identity, "tags": complete(identity), "drawn": "random"} for identity in drawn)
    for _ in connection.pipelined("item.check", requests):
        pass
    trial.settle(connection)


def head(entries, wanted):
    """The first `wanted` gaps of worklist entries, as (id, tags); the last entry may be cut."""
    left = wanted
    for entry in entries:
        tags = [gap["tag"] for gap in entry["gaps"]][:left]
        left -= len(tags)
        if tags:
            yield entry["id"], tags
        if left == 0:
            return


def rule(connection, entries, is_true):
    """Rules on all tags of the entries, (id, tags): what `is_true` belongs. How many rulings, and of these belongs."""
    requests = []
    for identity, tags in entries:
        belongs = [tag for tag in tags if is_true(identity, tag)]
        requests.append({"id": identity, "belongs": belongs, "not": [tag for tag in tags if tag not in belongs]})
    for _ in connection.pipelined("item.rule", iter(requests)):
        pass
    trial.settle(connection)
    belonging = sum(len(request["belongs"]) for request in requests)
    return belonging + sum(len(request["not"]) for request in requests), belonging


def shown(connection, ids, wanted):
    """The first `wanted` gaps that an editor who opens these items sees, as (id, tags)."""
    entries = []
    requests = ({"id": identity, "floor": EDITOR_FLOOR} for identity in ids)
    for identity, answer in zip(ids, connection.pipelined("item.gaps", requests)):
        entries.append({"id": identity, "gaps": answer["gaps"]})
    return list(head(entries, wanted))
