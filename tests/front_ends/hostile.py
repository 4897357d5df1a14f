"""What no decent front end sends, and what goes on for long: the kernel stays alive, answers, and leaves nothing behind.

    hostile.py PROGRAM [EXECUTIONS]
"""

import json
import os
import random
import socket
import struct
import subprocess
import sys
import time

from conversation import DELIMITER, Checks, FrontEnd, Kernel, end_process, gone, program_from_arguments

EXECUTIONS = 10_000
GREETING = b"\xff" + bytes(8) + b"\x7f" + b"\x03\x00" + b"NULL".ljust(20, b"\0") + bytes(32)


def ready(kind):
    name, value = b"Socket-Type", kind.encode()
    body = b"\x05READY" + bytes([len(name)]) + name + struct.pack(">I", len(value)) + value
    return bytes([4, len(body)]) + body


def raw(kernel, port):
    """A bare connection to one of the kernel's ports."""
    connection = socket.create_connection(("127.0.0.1", kernel.connection[port]), timeout=5)
    connection.settimeout(1)
    return connection


PORTS = {"shell_port": "DEALER", "iopub_port": "SUB", "stdin_port": "DEALER", "control_port": "DEALER", "hb_port": "REQ"}


def still_there(checks, kernel, front, what):
    # What was sent before may have failed, and stop a cell that stands behind it: the second is behind nothing.
    front.execute("1")
    front.forget()
    return checks.that(kernel.is_alive() and front.answers() and front.beat(5)[0], what, kernel.words()[-500:])


def frames(checks, kernel, front):
    with checks.about("frames that are no message"):
        whole, _ = front.frames("execute_request", {"code": "1 + 1"})
        for channel in ("shell", "control", "stdin"):
            for length in range(1, len(whole)):
                front.send_frames(whole[:length], channel)
            front.send_frames([b""] * 3, channel)
            front.send_frames([DELIMITER] * 7, channel)
            front.send_frames([os.urandom(50) for _ in range(6)], channel)
            front.send_frames([*whole[:2], *(os.urandom(50) for _ in range(4))], channel)
            front.send_frames([b"x"] * 20_000, channel)
            front.send_frames([*[b"identity"] * 1_000, *front.frames("kernel_info_request", {})[0]], channel)
        front.sockets["shell"].send(b"one frame")
        still_there(checks, kernel, front, "too few, too many, empty, in disorder, at random")
        extra, identity = front.frames("execute_request", {"code": "1 + 1"})
        front.send_frames([*extra, b"a buffer", os.urandom(1000)])
        checks.equal(front.reply(identity).content["status"], "ok", "buffers behind a message do no harm")

    with checks.about("well signed, and no message all the same"):
        def signed(parts, channel="shell"):
            front.send_frames([DELIMITER, front.signature(parts), *parts], channel)

        header = json.dumps({"msg_id": "hostile", "session": "x", "msg_type": "execute_request", "username": "x",
                             "version": "5.4", "date": "2000-01-01T00:00:00Z"}).encode()
        deep = b"[" * 100_000
        content = b'{"code": "1 + 1"}'
        for odd in (b"", b"\xff\xfe{}", b"{", deep, deep + b"]" * 100_000, b'{"a":' * 100_000, b"nonsense", b"NaN", b"\0" * 100):
            for position in range(4):
                parts = [header, b"{}", b"{}", content]
                parts[position] = odd
                for channel in ("shell", "control"):
                    signed(parts, channel)
        still_there(checks, kernel, front, "parts that are no JSON, not UTF-8, or nested 100,000 deep")
        for odd in (b"[]", b"1", b"null", b'"text"', b"true", b"1e999", b"-0", b"123456789012345678901234567890"):
            for position in range(4):
                parts = [header.replace(b"hostile", os.urandom(8).hex().encode()), b"{}", b"{}", content]
                parts[position] = odd
                for channel in ("shell", "control"):
                    signed(parts, channel)
        still_there(checks, kernel, front, "parts that are lists, numbers, words or nothing, and should be objects")


REQUESTS = [
    "execute_request", "complete_request", "inspect_request", "is_complete_request", "history_request",
    "comm_info_request", "kernel_info_request", "comm_open", "comm_msg", "comm_close", "interrupt_request",
]
FIELDS = [
    "code", "cursor_pos", "detail_level", "silent", "store_history", "user_expressions", "allow_stdin", "stop_on_error",
    "hist_access_type", "n", "start", "stop", "session", "pattern", "output", "unique", "raw", "target_name", "comm_id", "data",
]
ODD = [
    5, -1, 10**30, 1e308, -(2**63), 2**64, True, None, "", "x", "±µ😀" * 10, [], [[]], {}, {"a": {"b": []}}, "\0", "\ud800",
    "a" * 100_000, "*" * 200 + "b",
]


def fields(checks, kernel, front):
    with checks.about("fields of wrong types"):
        chance = random.Random(4)
        for kind in REQUESTS:
            for odd in ODD:
                for content in (dict.fromkeys(FIELDS, odd), odd, {"code": "smooth(±", "cursor_pos": odd},
                                {"code": "1 + 1", "user_expressions": {"a": odd, "b": {"c": odd}}},
                                {"hist_access_type": "search", "pattern": odd, "n": odd},
                                {name: chance.choice(ODD) for name in FIELDS}):
                    if kind == "execute_request" and not isinstance(content, dict):
                        content = {"code": odd}
                    front.send(kind, content, chance.choice(["shell", "control"]))
        still_there(checks, kernel, front, f"{len(REQUESTS) * len(ODD) * 6:,} requests with fields of every type")
        for metadata in ([], 5, None, "x", {"cellId": 5}, {"cellId": []}, {"cellId": ""}, {"cellId": "x" * 1_000_000},
                         {"cellId": "a", "deletedCells": "a"}, {"cellId": "a", "deletedCells": [5, None, "a", []]},
                         {"deletedCells": {"a": 1}}, {"cellId": "\ud800"}):
            front.send("execute_request", {"code": "1 + 1"}, metadata=metadata)
        still_there(checks, kernel, front, "metadata of every type")
        for header in ({"session": 5}, {"session": None}, {"date": 5}, {"date": "yesterday"}, {"username": None},
                       {"version": "99.9"}, {"version": 5}, {"msg_id": 5}, {"msg_type": []}, {"subshell_id": "x"},
                       {"date": "9999-99-99T99:99:99Z"}, {"date": "2026-01-01T00:00:00+23:59"}):
            front.send("execute_request", {"code": "1 + 1"}, header=header)
        still_there(checks, kernel, front, "headers of every type")
        for kind in ("no_such_request", "execute_reply", "status", "../../x", "x" * 1_000_000, "shutdown_reply", "\0",
                     "input_reply", "debug_request", "create_subshell_request", "usage_request"):
            for channel in ("shell", "control", "stdin"):
                front.send(kind, {}, channel)
        still_there(checks, kernel, front, "requests of unknown types")
        position = front.ask("complete_request", {"code": "±±smo", "cursor_pos": 5}).reply.content
        checks.equal((position["cursor_start"], position["cursor_end"]), (2, 5), "positions are code points")
        for cursor in (-1, 10**30, "x", None, 9):
            reply = front.ask("inspect_request", {"code": "smooth", "cursor_pos": cursor, "detail_level": 0}).reply
            checks.equal(reply.content["status"], "ok", f"a position of {cursor!r} is answered")


def sizes(checks, kernel, front):
    with checks.about("sizes"):
        large = b"x" * 100_000_000
        for channel in ("shell", "control"):
            front.send_frames([DELIMITER, b"no signature", b"{}", b"{}", b"{}", large], channel)
        front.send_frames([large], "stdin")
        still_there(checks, kernel, front, "frames of 100 MB without a signature")
        began = time.monotonic()
        reply = front.ask("execute_request", {"code": "1 + 1 # " + "x" * 100_000_000}, seconds=120)
        checks.that(reply.status == "ok", f"a cell of 100 MB is run ({time.monotonic() - began:.1f} s)", str(reply.reply)[:300])
        del reply
        front.forget()
        for words, code in [("brackets", "(" * 3_000_000), ("signs", "-" * 3_000_000 + "1"), ("lines", "1\n" * 1_000),
                            ("strange signs", "\u200b\ufeff\u202e\0\x1b[31m" * 50_000), ("powers", "2" + "^2" * 500_000)]:
            status = front.execute(code, seconds=120).status
            checks.that(status in ("ok", "error"), f"a cell of many {words}: {status}")
        front.forget()
        still_there(checks, kernel, front, "and the kernel goes on")
        checks.note(f"memory is {kernel.memory_kib() / 1024:.0f} MiB, and was at most {kernel.memory_kib('VmHWM') / 1024:.0f} MiB")


def connections(checks, kernel, front):
    with checks.about("connections that speak no protocol"):
        def attempt(bytes_sent, port):
            with raw(kernel, port) as connection:
                try:
                    connection.sendall(bytes_sent)
                    connection.recv(64)
                except OSError:
                    pass

        for port, kind in PORTS.items():
            for garbage in (b"", b"GET / HTTP/1.1\r\nHost: x\r\n\r\n", os.urandom(4096), b"\xff" * 4096, bytes(4096),
                            GREETING[:20], GREETING, GREETING + b"\xff" * 500, GREETING + os.urandom(500),
                            GREETING.replace(b"NULL", b"XXXX"), GREETING + ready("NONSENSE"), GREETING + ready("PUSH"),
                            GREETING + bytes([4, 5]) + b"\x05XX", GREETING + bytes([4, 0]),
                            GREETING + ready(kind) + bytes([6]) + struct.pack(">Q", 2**61),
                            GREETING + ready(kind) + bytes([2]) + struct.pack(">Q", 2**64 - 1),
                            GREETING + bytes([2]) + struct.pack(">Q", 2**61)):
                attempt(garbage, port)
            still_there(checks, kernel, front, f"on {port}: garbage, half greetings, frames that claim 2^61 bytes")
        checks.that(kernel.memory_kib("VmHWM") < 4 * 1024 * 1024, "no memory was taken for what was only claimed",
                    kernel.memory_kib("VmHWM"))
        held = [raw(kernel, port) for port in PORTS for _ in range(40)]
        for connection in held[::2]:
            connection.sendall(GREETING[:33])
        still_there(checks, kernel, front, "200 half connections held open")
        for connection in held:
            connection.close()

    with checks.about("1,000 connections opened and dropped"):
        before = len(os.listdir(f"/proc/{kernel.process.pid}/fd"))
        for number in range(1_000):
            port = list(PORTS)[number % 5]
            with raw(kernel, port) as connection:
                if number % 2:
                    connection.sendall(GREETING + ready(PORTS[port]))
        still_there(checks, kernel, front, "the kernel goes on")
        end = time.monotonic() + 10
        while (after := len(os.listdir(f"/proc/{kernel.process.pid}/fd"))) > before + 20 and time.monotonic() < end:
            time.sleep(0.1)
        checks.that(after <= before + 20, f"their files are closed ({before} before, {after} afterwards)")

    with checks.about("a second front end"):
        with FrontEnd(kernel) as other:
            other.execute("shared = 4 K", "a")
            checks.that(front.execute("shared", "b").words.startswith("4 K"), "works on the same session")
            first, second = front.begin("6 * 7", "c"), other.begin("6 * 8", "d")
            checks.that("42" in front.finish(first).words and "48" in other.finish(second).words, "each gets its own reply")
            other.begin("1 + 1")
        still_there(checks, kernel, front, "it goes, with a request on its way")
        for _ in range(30):
            with FrontEnd(kernel) as other:
                other.execute("1 + 1")
        still_there(checks, kernel, front, "30 more come and go")

    with checks.about("a front end that does not listen"):
        deaf = FrontEnd(kernel)
        deaf.sockets["iopub"].rcvhwm = 1
        for _ in range(2_000):
            deaf.begin("1 + 1")
        still_there(checks, kernel, front, "2,000 cells whose results nobody takes")
        deaf.close()
        still_there(checks, kernel, front, "and its end")
        front.forget()


def soak(checks, program, executions):
    with checks.about(f"{executions:,} executions"), Kernel(program) as kernel, FrontEnd(kernel) as front:
        chance = random.Random(11)
        front.execute("clock = 1850..1900 CE by 1 yr\nx = 1 K", "settings")
        early = executions // 5
        began = time.monotonic()
        memory = {}
        statuses = {"ok": 0, "error": 0}
        for number in range(1, executions + 1):
            # Values come again, as they do when a notebook is run again: what is remembered of them is no leak.
            value = number % 500
            cell = f"cell {number % 40}" if number % 3 else None
            code = chance.choice([
                f"x = {value % 10} K", "x * 2", f"y{value % 50} = x + {value % 50} K\ny{value % 50}", "1 + 1", "no_such_name", "1 +",
                "x + 1 W/m2", f"{value} W/m2", "# nothing", "z = x ± 1 K", "constant(x)" if number % 10 == 0 else "x / 3",
            ])
            statuses[front.execute(code, cell).status] += 1
            if number % 5 == 0:
                front.ask("complete_request", {"code": "smo", "cursor_pos": 3})
                front.ask("inspect_request", {"code": "x", "cursor_pos": 1, "detail_level": 0})
            if number % 20 == 0:
                front.forget()
            if number % (executions // 10) == 0:
                memory[number] = kernel.memory_kib() / 1024
        checks.note(", ".join(f"{number:,}: {mebibytes:.1f} MiB" for number, mebibytes in memory.items()))
        checks.note(f"{executions / (time.monotonic() - began):.0f} a second, {statuses}")
        grown = memory[executions] - memory[early]
        checks.that(grown < max(8, 0.1 * memory[early]), f"memory is flat from {early:,} to {executions:,}: {grown:+.1f} MiB")
        checks.that(front.answers(), "and a cell is run")


# Stands for the program that starts kernels: it says the number of the kernel's process, and waits.
STARTER = """
import os, subprocess, sys, time
environment = os.environ | {"JPY_PARENT_PID": str(os.getpid())}
kernel = subprocess.Popen([sys.argv[1], "kernel", sys.argv[2]], env=environment, stdout=subprocess.DEVNULL,
                          stderr=subprocess.DEVNULL)
print(kernel.pid, flush=True)
time.sleep(600)
"""


def ends(checks, program):
    with checks.about("the end of the front end"):
        for busy in (False, True):
            with Kernel(program) as kernel:
                kernel.process.terminate()
                kernel.wait()
                starter = subprocess.Popen([sys.executable, "-c", STARTER, program, str(kernel.file)], text=True,
                                           stdout=subprocess.PIPE, env=kernel.environment, cwd=kernel.folder)
                process = int(starter.stdout.readline())
                with FrontEnd(kernel) as front:
                    front.execute("members = 5000\nclock = 1..2000 CE by 1 yr\ns = sinusoid(100 yr, 1 ± 0.1 W/m2, 1000 CE)", "a")
                    if busy:
                        front.begin("[respond(scale(s, k), two_layer(feedback: 1.2 ± 0.2 W/m2/K)) for k in [1, 2, 3, 4, 5]]", "b")
                        time.sleep(0.3)
                    else:
                        front.execute("s |> mean()", "b")
                    time.sleep(0.6)
                    checks.that(not gone(process), "the kernel lives while its parent does")
                    killed = time.monotonic()
                    starter.kill()
                    starter.wait()
                    while not gone(process) and time.monotonic() < killed + 5:
                        time.sleep(0.02)
                    seconds = time.monotonic() - killed
                    words = "while a cell is computing" if busy else "when nothing runs"
                    checks.that(seconds < 2, f"killing its parent {words} ends it: {seconds:.2f} s")
                end_process(process)
                left = [path.name for path in (*kernel.temporary.iterdir(), *kernel.own.glob("*.rhythmite.json"))]
                checks.equal(left, [], "and no file is left")
    with checks.about("signals"):
        for busy in (False, True):
            with Kernel(program) as kernel, FrontEnd(kernel) as front:
                front.execute("members = 5000\nclock = 1..2000 CE by 1 yr\ns = sinusoid(100 yr, 1 ± 0.1 W/m2, 1000 CE)", "a")
                if busy:
                    front.begin("[respond(scale(s, k), two_layer(feedback: 1.2 ± 0.2 W/m2/K)) for k in [1, 2, 3, 4, 5]]", "b")
                    time.sleep(0.3)
                began = time.monotonic()
                kernel.process.terminate()
                code = kernel.wait()
                checks.that(code == 0, f"SIGTERM ends it{' while a cell is computing' if busy else ''}: {time.monotonic() - began:.2f} s", code)
                checks.equal([path.name for path in kernel.temporary.iterdir()], [], "and no file is left")


def main():
    checks = Checks()
    program = program_from_arguments()
    executions = int(sys.argv[2]) if len(sys.argv) > 2 else EXECUTIONS
    for scene in (frames, fields, connections, sizes):
        with checks.about(f"— {scene.__name__} —"), Kernel(program) as kernel, FrontEnd(kernel) as front:
            scene(checks, kernel, front)
            checks.that("panicked" not in kernel.words(), "nothing panicked", kernel.words()[-1000:])
    ends(checks, program)
    soak(checks, program, executions)
    checks.end()


if __name__ == "__main__":
    main()
