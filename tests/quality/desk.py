"""The daemon's answers for a whole desk: all tags, the worklist page after page, and when it is ready."""

import trial

PAGE = 500
WORKLIST_CAP_S = 300


def all_tags(connection):
    """What `tag.list` says of each tag, by name."""
    tags, after = {}, {}
    while after is not None:
        answer = connection.call("tag.list", {"most": 10_000, **after})
        tags.update((tag["tag"], tag) for tag in answer["tags"])
        after = {"after": answer["next"]} if "next" in answer else None
    return tags


def worklist(connection, **asked):
    """The entries of the worklist from its head on, asked page by page as they are needed."""
    after = {}
    while after is not None:
        answer = connection.call("desk.worklist", {"most": PAGE, **asked, **after})
        yield from answer["items"]
        after = {"after": answer["next"]} if "next" in answer else None


def wait_for_worklist(connection):
    """Waits until no entry of the worklist is older than the model; a daemon that does not say is not waited for."""
    def fresh():
        kept = connection.call("daemon.state").get("worklist")
        return kept is None or kept["stale"] == 0
    trial.wait_for(fresh, WORKLIST_CAP_S, "scoring the worklist again")
