"""What a running daemon takes: memory as the system counts it and as the daemon says, and disk."""

import os
import shutil
import socket
import struct
import subprocess
import time

FLUSHED_CAP_S = 120
ENVIRONMENTS = ("store", "model")  # folders of the home
READERS_HEADING = "Reader Table Status"  # of mdb_stat -r
PARTS = ("dictionary", "weights", "counts", "worklist", "asking")  # of daemon.state's memory


def pid_of(connection):
    """The process at the other end of a Unix socket."""
    peer = connection.socket.getsockopt(socket.SOL_SOCKET, socket.SO_PEERCRED, struct.calcsize("3i"))
    return struct.unpack("3i", peer)[0]


def anonymous_bytes(connection):
    """Memory that is the daemon's own: RssAnon, which leaves out what is mapped from files."""
    with open(f"/proc/{pid_of(connection)}/status", encoding="ascii") as file:
        line = next((line for line in file if line.startswith("RssAnon:")), None)
    if line is None:
        raise ValueError("the daemon has ended")
    return int(line.split()[1]) * 1024


def descriptors(connection):
    """How many descriptors the daemon has open."""
    return len(os.listdir(f"/proc/{pid_of(connection)}/fd"))


def stale_readers(connection):
    """By environment, reader slots of processes that are no more; None without mdb_stat (lmdb-utils)."""
    if not shutil.which("mdb_stat"):
        return None
    found = {}
    for name in ENVIRONMENTS:
        command = ["mdb_stat", "-r", os.path.join(home_of(connection), name)]
        said = subprocess.run(command, check=False, stdout=subprocess.PIPE, text=True).stdout
        if READERS_HEADING not in said:  # its status says nothing: it is 1 where all went well
            raise ValueError(f"{' '.join(command)} said nothing of readers")
        pids = [words[0] for words in map(str.split, said.splitlines()) if len(words) == 3 and words[0].isdigit()]
        found[name] = sum(not os.path.exists(f"/proc/{pid}") for pid in pids)
    return found


def stated_bytes(state):
    """What daemon.state says its parts hold."""
    return sum(state["memory"][part] for part in PARTS)


def home_of(connection):
    """Where the daemon keeps things."""
    return os.path.join(os.path.dirname(connection.socket.getpeername()), "home")


def disk_bytes(connection):
    """What the home takes on disk, holes left out."""
    return sum(os.stat(os.path.join(folder, name)).st_blocks * 512
               for folder, _, names in os.walk(home_of(connection)) for name in names)


def wait_flushed(connection):
    """Waits until the model is stored: until the disk has stayed the same for longer than a flush lets wait."""
    still_s = 2 * connection.call("daemon.state")["settings"]["flush_every_ms"] / 1000
    end, since, seen = time.monotonic() + FLUSHED_CAP_S, time.monotonic(), None
    while time.monotonic() < min(end, since + still_s):
        disk = connection.call("daemon.state")["disk"]
        if disk != seen:
            since, seen = time.monotonic(), disk
        time.sleep(0.05)  # between two looks
