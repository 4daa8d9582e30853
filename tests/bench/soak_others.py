"""What goes on beside a soak's feed: peers that are a nuisance, and an operator who has things written and learned."""

import contextlib
import itertools
import socket
import threading
import time

import wire

PEERS = 400  # a quarter of each kind
TURN_S = 30  # between two things that the operator wants
QUESTION = b'{"jsonrpc":"2.0","id":1,"method":"daemon.state"}\n'
BUSY = "-32005"  # one is under way already, or there is no room


class Nuisances(threading.Thread):
    """Peers that say nothing, stop in the middle of a line, read no answer, or send a byte a second; for ever anew."""

    def __init__(self, path):
        super().__init__(daemon=True)
        self.path, self.ending, self.opened, self.closed = path, threading.Event(), 0, 0

    def open(self, kind):
        """One of them; None where the daemon takes no more."""
        peer = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        peer.setblocking(False)
        try:
            peer.connect(self.path)
            if kind == 1:
                peer.send(QUESTION[:20])
        except OSError:
            peer.close()
            return None
        self.opened += 1
        return peer

    def bother(self, kind, peer):
        """What it does in a second; False once it was closed."""
        try:
            if kind == 2:
                peer.send(QUESTION * 20)
            elif kind == 3:
                peer.send(QUESTION[:1])
            elif kind == 0:
                return peer.recv(1) != b""
        except BlockingIOError:
            pass
        except OSError:
            return False
        return True

    def run(self):
        peers = {}
        while not self.ending.wait(1):
            for place in range(PEERS):
                kind, peer = place % 4, peers.get(place)
                if peer is None:
                    peers[place] = self.open(kind)
                elif not self.bother(kind, peer):
                    peer.close()
                    peers[place], self.closed = None, self.closed + 1
        for peer in filter(None, peers.values()):
            peer.close()


class Operator(threading.Thread):
    """By turns a snapshot, a backup and a rebuild; what was refused since another is under way is counted."""

    def __init__(self, path):
        super().__init__(daemon=True)
        self.path, self.ending, self.failure = path, threading.Event(), None
        self.done, self.refused = {}, 0

    def turns(self):
        """What is wanted, one after the other; names that were not there before."""
        weights = itertools.cycle((1.5, 2.0))
        for number in itertools.count():
            yield "snapshot.write", {}
            yield "backup.write", {"name": f"b{number}"}
            yield "snapshot.write", {}
            if number % 4 == 3:
                yield "daemon.rebuild", {"settings": {"title_weight": next(weights)}}

    def run(self):
        with contextlib.suppress(OSError), wire.Wire(self.path, timeout_s=900) as connection:
            for method, params in self.turns():
                if self.ending.wait(TURN_S):
                    return
                try:
                    connection.call(method, params)
                    self.done[method] = self.done.get(method, 0) + 1
                except wire.WireError as error:
                    if BUSY not in str(error):
                        self.failure = f"{method}: {error}"
                        return
                    self.refused += 1


@contextlib.contextmanager
def at_work(path):
    """Both, while the body runs."""
    others = Nuisances(path), Operator(path)
    for other in others:
        other.start()
    try:
        yield others
    finally:
        for other in others:
            other.ending.set()
        begun = time.monotonic()
        for other in others:
            other.join(max(1, 60 - (time.monotonic() - begun)))
