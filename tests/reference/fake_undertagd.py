#!/usr/bin/python3
"""A daemon for test_quality.py: knows a tag as soon as it was filed, and finds it where a text names it.

Options as undertagd's; `--set fake=`: `silent` proposes nothing, `dead` ends at once, `lagging` is behind with
learning until its state was asked for twice.
"""
import json
import os
import signal
import socket
import sys

sys.dont_write_bytecode = True


class Daemon:
    """What was filed, and the answers to the three methods that a trial uses."""

    def __init__(self, settings):
        self.settings, self.tags, self.seq, self.asked = settings, set(), 0, 0

    def item_file(self, params):
        self.tags.update(params["tags"])
        self.seq += 1
        return {"seq": self.seq, "was": "new"}

    def daemon_state(self, _):
        self.asked += 1
        behind = "fake=lagging" in self.settings and self.asked < 2
        return {"seq": self.seq, "learned": self.seq - behind, "backlog": int(behind)}

    def item_gaps(self, params):
        if set(params) != {"title", "text", "most", "floor"} or (params["most"], params["floor"]) != (20, 0):
            raise ValueError("not a draft without tags, most 20, floor 0")
        if "fake=lagging" in self.settings and self.asked < 2:
            raise ValueError("asked before all was learned")
        if "fake=silent" in self.settings:
            return {"gaps": [], "expected": 0, "learned": self.seq, "early": False}
        chances = {tag: 0.9 if tag in params["text"] else 0.05 for tag in self.tags}
        gaps = [{"tag": tag, "chance": chances[tag], "score": 0} for tag in sorted(chances, key=chances.get, reverse=True)]
        return {"gaps": gaps, "expected": 1, "learned": self.seq, "early": False}

    def answer(self, line):
        """The answer to one line."""
        request = json.loads(line)
        answer = {"jsonrpc": "2.0", "id": request["id"]}
        try:
            answer["result"] = getattr(self, request["method"].replace(".", "_"))(request["params"])
        except ValueError as error:
            answer["error"] = {"code": -32602, "message": str(error)}
        return json.dumps(answer).encode() + b"\n"


def main(arguments):
    options = list(zip(arguments[::2], arguments[1::2]))
    settings = [value for name, value in options if name == "--set"]
    path = dict(options)["--socket"]
    if "fake=dead" in settings:
        sys.exit("undertagd: there is no room for a home")
    signal.signal(signal.SIGTERM, lambda *_: os._exit(0))
    daemon = Daemon(settings)
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as listener:
        listener.bind(path)
        listener.listen()
        while True:
            connection, _ = listener.accept()
            with connection, connection.makefile("rb") as lines:
                for line in lines:
                    connection.sendall(daemon.answer(line))


if __name__ == "__main__":
    main(sys.argv[1:])
