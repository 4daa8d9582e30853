"""The client's side of the wire: JSON-RPC 2.0, one JSON text a line, on a Unix stream socket."""

import collections
import json
import select
import socket

OUTSTANDING = 256  # requests sent and not yet answered, at most
CHUNK_BYTES = 1 << 16


class WireError(Exception):
    """An error answer, a broken connection, or no answer in time."""


class Wire:
    """One connection. Not for several threads."""

    def __init__(self, path, timeout_s=120):
        self.timeout_s = timeout_s
        self.number = 0
        self.unsent, self.unread = bytearray(), bytearray()
        self.socket = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        try:
            self.socket.connect(path)
        except OSError:
            self.socket.close()
            raise
        self.socket.setblocking(False)

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self.socket.close()

    def call(self, method, params=None):
        """The result of one request."""
        return next(self.pipelined(method, [params or {}]))

    def pipelined(self, method, many, outstanding=OUTSTANDING):
        """The results of a request for each of `many` params, in their order. Writes while it reads."""
        many, sent = iter(many), collections.deque()
        while True:
            self._fill(method, many, sent, outstanding)
            if not sent:
                return
            for line in self._exchange():
                yield result_of(line, *sent.popleft())

    def _fill(self, method, many, sent, outstanding):
        """Puts requests in line until `outstanding` of them wait or there are no more."""
        while len(sent) < outstanding:
            params = next(many, None)
            if params is None:
                return
            self.number += 1
            request = {"jsonrpc": "2.0", "id": self.number, "method": method, "params": params}
            self.unsent += json.dumps(request, ensure_ascii=False, separators=(",", ":")).encode() + b"\n"
            sent.append((self.number, params))

    def _exchange(self):
        """Waits until the socket takes or gives something; the whole lines that came."""
        readable, writable, _ = select.select([self.socket], [self.socket] if self.unsent else [], [], self.timeout_s)
        if not readable and not writable:
            raise WireError(f"no answer for {self.timeout_s} s")
        try:
            if writable:
                del self.unsent[:self.socket.send(self.unsent[:CHUNK_BYTES])]
            return self._read() if readable else []
        except OSError as error:
            raise WireError(f"the connection broke: {error.strerror}") from error

    def _read(self):
        """What is there to read, cut into whole lines; the rest waits."""
        data = self.socket.recv(CHUNK_BYTES)
        if not data:
            raise WireError("the daemon closed the connection")
        self.unread += data
        *lines, rest = self.unread.split(b"\n")
        self.unread = rest
        return lines


def result_of(line, number, params):
    """The result in an answer to the request `number`; an error becomes a WireError that says what it was about."""
    answer = json.loads(line)
    if "error" in answer:
        error = answer["error"]
        raise WireError(f"{error['message']} ({error['code']}, {error.get('data')}) for {str(params)[:200]}")
    if answer.get("id") != number:
        raise WireError(f"the answer to request {number} has the id {answer.get('id')!r}")
    return answer["result"]
