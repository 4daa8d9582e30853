"""The daemon under trial: started in a home of its own, fed and asked through its socket, and stopped."""

import contextlib
import os
import subprocess
import sys
import tempfile
import time

import numpy as np

import wire

DEPTH = 20
START_CAP_S, START_PAUSE_S = 30, 0.005
SETTLE_CAP_S = 900
REHEARSAL_CAP_S = 300
STOP_CAP_S = 120


class TrialError(Exception):
    """The daemon did not do its part; the text says which."""


def wait_for(condition, cap_s, what, pause_s=0.05):
    """Asks `condition` until it holds, for `cap_s` at most."""
    end = time.monotonic() + cap_s
    while not condition():
        if time.monotonic() > end:
            raise TrialError(f"{what} did not happen within {cap_s} s")
        time.sleep(pause_s)  # between two looks at the condition


def accepts(path, process):
    """Whether the socket at `path` takes connections; a daemon that has ended never will."""
    if process.poll() is not None:
        raise TrialError(f"the daemon ended with {process.returncode} before it was ready")
    try:
        wire.Wire(path).__exit__()
    except OSError:
        return False
    return True


@contextlib.contextmanager
def daemon(program, settings):
    """A daemon in a temporary home, with a connection to it; ended, and its home removed, afterwards."""
    with home() as folder, running(program, folder, settings) as connection:
        yield connection


def home():
    """A temporary folder for a daemon's home, for several runs one after the other."""
    return tempfile.TemporaryDirectory(prefix="undertag-quality-")


@contextlib.contextmanager
def running(program, folder, settings):
    """A run of a daemon with its home in the folder, with a connection to it; ended afterwards."""
    path = os.path.join(folder, "socket")
    with contextlib.suppress(FileNotFoundError):
        os.remove(path)  # of a run before
    command = [program, "--home", os.path.join(folder, "home"), "--socket", path]
    # Unless asked for, nothing is rehearsed: what there is time for would make a difference.
    if not says_rehearsal(settings):
        settings = ["rehearsal_share=0", *settings]
    for setting in settings:
        command += ["--set", setting]
    with open(os.path.join(folder, "log"), "w+b") as log, \
            subprocess.Popen(command, stdin=subprocess.DEVNULL, stderr=log) as process:
        try:
            wait_for(lambda: accepts(path, process), START_CAP_S, "the start of the daemon", START_PAUSE_S)
            with wire.Wire(path) as connection:
                yield connection
            stop(process)
        except Exception:
            show_end(log)
            raise
        finally:
            process.kill()


def says_rehearsal(settings):
    """Whether the settings say how much is rehearsed."""
    return any(setting.startswith("rehearsal_share=") for setting in settings)


def stop(process):
    """Asks the daemon to end, and minds how it did."""
    process.terminate()
    try:
        status = process.wait(STOP_CAP_S)
    except subprocess.TimeoutExpired as error:
        raise TrialError(f"the daemon did not stop within {STOP_CAP_S} s") from error
    if status != 0:
        raise TrialError(f"the daemon ended with {status}")


def show_end(log):
    """The last of what the daemon logged, on standard error."""
    log.seek(0)
    for line in log.read().decode(errors="replace").splitlines()[-10:]:
        print(f"undertagd: {line}", file=sys.stderr)


def settle(connection):
    """Waits until all that was changed is learned."""
    def settled():
        state = connection.call("daemon.state")
        return state["learned"] == state["seq"] and state["backlog"] == 0
    wait_for(settled, SETTLE_CAP_S, "learning all that was filed")


def rehearse(connection):
    """Waits until no item's turn is due any more; False where the daemon does not rehearse."""
    if "rehearsal" not in connection.call("daemon.state"):
        return False

    def rehearsed():
        return connection.call("daemon.state")["rehearsal"]["due"] == 0
    wait_for(rehearsed, REHEARSAL_CAP_S, "rehearsing all that was filed")
    return True


def file_items(connection, items):
    """Files the items in order and waits until all is learned; seconds until filed, and until learned."""
    start = time.monotonic()
    for answer in connection.pipelined("item.file", items):
        if answer["was"] != "new":
            raise TrialError(f"an item of the corpus was {answer['was']} in an empty home")
    filed = time.monotonic() - start
    settle(connection)
    return filed, time.monotonic() - start


def ask(connection, items, numbers):
    """What is proposed for the items as drafts without their tags, items × DEPTH: see `proposals`."""
    return proposals(connection, [{"title": item["title"], "text": item["text"]} for item in items], numbers)


def ask_filed(connection, items, numbers):
    """What the items are said to lack as they were filed, items × DEPTH: see `proposals`."""
    return proposals(connection, [{"id": item["id"]} for item in items], numbers)


def proposals(connection, asked, numbers):
    """The first DEPTH gaps whatever their chance: tag numbers (-1: no more) and chances."""
    ranked, chances = np.full((len(asked), DEPTH), -1), np.zeros((len(asked), DEPTH))
    requests = ({**one, "most": DEPTH, "floor": 0} for one in asked)
    for row, answer in enumerate(connection.pipelined("item.gaps", requests)):
        gaps = answer["gaps"]
        ranked[row, :len(gaps)] = [numbers[gap["tag"]] for gap in gaps]
        chances[row, :len(gaps)] = [gap["chance"] for gap in gaps]
        if (np.diff(chances[row]) > 0).any():
            raise TrialError(f"the gaps of {str(asked[row])[:80]} are not by falling chance")
    return ranked, chances
