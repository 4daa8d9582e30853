#!/usr/bin/python3
"""The client's side of the wire in tests/quality, against a small server that follows JSON-RPC 2.0."""
import json
import os
import socket
import sys
import tempfile
import threading
import unittest

import python_tests
import wire

CAP_S = 20


class Server:
    """Serves one connection in a thread: `serve` gets the socket."""

    def __init__(self, serve):
        self.folder = tempfile.TemporaryDirectory()
        self.path = os.path.join(self.folder.name, "socket")
        self.listener = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        self.listener.bind(self.path)
        self.listener.listen()
        self.thread = threading.Thread(target=self._run, args=(serve,), daemon=True)
        self.thread.start()

    def _run(self, serve):
        connection, _ = self.listener.accept()
        connection.settimeout(CAP_S)
        with connection:
            serve(connection)

    def __enter__(self):
        return self.path

    def __exit__(self, *_):
        self.thread.join(CAP_S)
        self.listener.close()
        self.folder.cleanup()


def answer(line, **members):
    """An answer to the request in `line`."""
    request = json.loads(line)
    return json.dumps({"jsonrpc": "2.0", "id": request["id"], **(members or {"result": request["params"]})}).encode() + b"\n"


def echo(connection):
    """Answers each request with its params."""
    for line in connection.makefile("rb"):
        connection.sendall(answer(line))


class Pipelining(unittest.TestCase):
    """Many requests on one connection."""

    def test_results_come_in_the_order_of_the_requests(self):
        with Server(echo) as path, wire.Wire(path, CAP_S) as connection:
            many = [{"n": n} for n in range(2000)]
            self.assertEqual(list(connection.pipelined("echo", many)), many)

    def test_no_more_requests_than_allowed_wait_for_their_answers(self):
        taken, waiting = [], []

        def requests():
            for n in range(20):
                taken.append(n)
                yield {"n": n}

        with Server(echo) as path, wire.Wire(path, CAP_S) as connection:
            for answered, _ in enumerate(connection.pipelined("echo", requests(), outstanding=5)):
                waiting.append(len(taken) - answered)
        self.assertEqual(len(waiting), 20)
        self.assertEqual(max(waiting), 5)

    def test_large_requests_and_answers_pass_while_both_sides_are_full(self):
        with Server(echo) as path, wire.Wire(path, CAP_S) as connection:
            many = [{"text": "ä" * 100_000, "n": n} for n in range(60)]
            self.assertEqual(list(connection.pipelined("echo", many)), many)

    def test_an_answer_in_pieces_is_put_together(self):
        def in_pieces(connection):
            line = answer(connection.makefile("rb").readline())
            for byte in line:
                connection.sendall(bytes([byte]))

        with Server(in_pieces) as path, wire.Wire(path, CAP_S) as connection:
            self.assertEqual(connection.call("echo", {"a": 1}), {"a": 1})

    def test_two_calls_follow_each_other_on_one_connection(self):
        with Server(echo) as path, wire.Wire(path, CAP_S) as connection:
            self.assertEqual([connection.call("echo", {"n": 1}), connection.call("echo")], [{"n": 1}, {}])


class Trouble(unittest.TestCase):
    """What is raised when it goes wrong."""

    def fails(self, serve, text, timeout_s=CAP_S):
        with Server(serve) as path, wire.Wire(path, timeout_s) as connection:
            with self.assertRaisesRegex(wire.WireError, text):
                connection.call("item.show", {"id": "logbook-7"})

    def test_an_error_answer_is_raised_with_its_sentence_its_code_and_the_params(self):
        def refuse(connection):
            line = connection.makefile("rb").readline()
            connection.sendall(answer(line, error={"code": -32001, "message": "There is no such item."}))
        self.fails(refuse, r"There is no such item\. \(-32001.*logbook-7")

    def test_an_answer_to_another_request_is_refused(self):
        def other(connection):
            connection.makefile("rb").readline()
            connection.sendall(b'{"jsonrpc":"2.0","id":99,"result":{}}\n')
        self.fails(other, "has the id 99")

    def test_a_connection_that_ends_is_an_error(self):
        self.fails(lambda connection: connection.makefile("rb").readline(), "closed the connection")

    def test_no_answer_in_time_is_an_error(self):
        done = threading.Event()

        def silent(_):
            done.wait(CAP_S)
        self.addCleanup(done.set)
        with Server(silent) as path:
            with wire.Wire(path, 0.1) as connection, self.assertRaisesRegex(wire.WireError, "no answer"):
                connection.call("daemon.state")
            done.set()


if __name__ == "__main__":
    python_tests.run(sys.modules[__name__])
