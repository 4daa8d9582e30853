"""What a running daemon takes: memory as the system counts it and as the daemon says, and disk."""

import os
import socket
import struct
import time

FLUSHED_CAP_S = 120
PARTS = ("dictionary", "weights", "counts", "worklist", "asking")  # of daemon.state's memory


def pid_of(connection):
    """The process at the other end of a Unix socket."""
    peer = connection.socket.getsockopt(socket.SOL_SOCKET, socket.SO_PEERCRED, struct.calcsize("3i"))
    return struct.unpack("3i", peer)[0]


def anonymous_bytes(connection):
    """Memory that is the daemon's own: RssAnon, which leaves out what is mapped from files."""
    with open(f"/proc/{pid_of(connection)}/status", encoding="ascii") as file:
        line = next(line for line in file if line.startswith("RssAnon:"))
    return int(line.split()[1]) * 1024


def stated_bytes(state):
    """What daemon.state says its parts hold."""
    return sum(state["memory"][part] for part in PARTS)


def disk_bytes(connection):
    """What the home takes on disk, holes left out."""
    home = os.path.join(os.path.dirname(connection.socket.getpeername()), "home")
    return sum(os.stat(os.path.join(folder, name)).st_blocks * 512
               for folder, _, names in os.walk(home) for name in names)


def wait_flushed(connection):
    """Waits until the model is stored: until the disk has stayed the same for longer than a flush lets wait."""
    still_s = 2 * connection.call("daemon.state")["settings"]["flush_every_ms"] / 1000
    end, since, seen = time.monotonic() + FLUSHED_CAP_S, time.monotonic(), None
    while time.monotonic() < min(end, since + still_s):
        disk = connection.call("daemon.state")["disk"]
        if disk != seen:
            since, seen = time.monotonic(), disk
        time.sleep(0.05)  # between two looks
