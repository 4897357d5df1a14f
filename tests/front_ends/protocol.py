"""The protocol to the letter: signatures, envelopes, executions, history, comms, interrupts, answers during a computation.

    protocol.py PROGRAM
"""

import json
import signal
import time

from conversation import (
    Checks, FrontEnd, Kernel, NoAnswer, plain, program_from_arguments, without_colours,
)

INTERRUPTED_WITHIN = 0.2  # seconds
ANSWERED_WITHIN = 0.1

SETTING = "members = 5000\nclock = 1..2000 CE by 1 yr\ns = sinusoid(100 yr, 1 ± 0.1 W/m2, 1000 CE)"
# Takes several seconds.
LONG = "[respond(scale(s, k), two_layer(feedback: 1.2 ± 0.2 W/m2/K)) for k in [1, 2, 3, 4, 5, 6]]"


def kernel_info(checks, front):
    with checks.about("kernel_info"):
        info = front.ask("kernel_info_request").reply
        checks.equal(info.kind, "kernel_info_reply", "the reply has its name")
        content = info.content
        checks.that(all(content.get(name) for name in ("implementation", "implementation_version", "banner")),
                    "the kernel says what it is", content)
        checks.that(content["protocol_version"] in ("5.4", "5.5"), "it speaks 5.4 or 5.5", content["protocol_version"])
        language = content["language_info"]
        checks.equal(language["name"], "rhythmite", "the language has its name")
        checks.equal(language["file_extension"], ".rhy", "files have their extension")
        checks.that("supported_features" not in content or "debugger" not in content["supported_features"],
                    "nothing is declared that is not there")
        by_control = front.ask("kernel_info_request", channel="control").reply
        checks.equal(by_control.content, content, "control answers the same")
        checks.equal(by_control.header["session"], info.header["session"], "all that comes is of one session")


def signatures(checks, kernel, front):
    with checks.about("signatures"):
        execution = front.execute("1 + 1")
        messages = [execution.reply, *execution.published]
        checks.that(all(message.well_signed for message in messages), "all that comes is signed with the key")

        def refused(frames, what):
            front.forget()
            front.send_frames(frames)
            answered = front.answers()
            silent = all(message.parent.get("msg_id") != "refused" for message in front.published)
            checks.that(answered and silent and kernel.is_alive(), f"{what} is refused in silence")

        content = {"code": "1 + 1", "silent": False}
        header = {"msg_id": "refused"}
        whole, _ = front.frames("execute_request", content, header=header)
        refused(front.frames("execute_request", content, header=header, key=b"another key")[0], "a message of another key")
        refused([whole[0], b"", *whole[2:]], "a message without signature")
        refused([whole[0], b"not hexadecimal \xff", *whole[2:]], "a signature that is no number")
        refused([whole[0], whole[1][:10], *whole[2:]], "half a signature")
        refused([*whole[:5], b'{"code": "2 + 2"}'], "a message altered on its way")
        front.forget()
        recorded, identity = front.frames("execute_request", content)
        front.send_frames(recorded)
        front.reply(identity)
        front.until_idle(identity)
        front.forget()
        front.send_frames(recorded)
        checks.that(front.answers() and not front.published_for(identity), "a message that was recorded and sent again is refused")
        upper, identity = front.frames("execute_request", content)
        front.send_frames(upper)
        front.reply(identity)
        front.until_idle(identity)
        front.forget()
        front.send_frames([upper[0], upper[1].upper(), *upper[2:]])
        checks.that(front.answers() and not front.published_for(identity), "and so it is with its signature in capitals")


def envelopes(checks, front):
    with checks.about("every answer stands between busy and idle, and names what it answers"):
        requests = [
            ("kernel_info_request", {}), ("complete_request", {"code": "smo", "cursor_pos": 3}),
            ("inspect_request", {"code": "smooth", "cursor_pos": 3, "detail_level": 0}),
            ("is_complete_request", {"code": "1"}), ("history_request", {"hist_access_type": "tail", "n": 1}),
            ("comm_info_request", {}), ("execute_request", {"code": "1 + 1"}), ("execute_request", {"code": "1 +"}),
            ("execute_request", {"code": "no_such_name"}), ("execute_request", {"code": ""}), ("execute_request", {}),
        ]
        for channel in ("shell", "control"):
            for kind, content in requests:
                if channel == "control" and kind == "execute_request":
                    continue
                front.forget()
                frames, identity = front.frames(kind, content)
                front.send_frames(frames, channel)
                reply = front.reply(identity, channel)
                published = front.until_idle(identity)
                what = f"{kind} {json.dumps(content)} on {channel}"
                states = [message.content["execution_state"] for message in published if message.kind == "status"]
                checks.that(
                    states == ["busy", "idle"] and published[0].kind == "status"
                    and reply.kind == kind.replace("_request", "_reply") and "status" in reply.content
                    and all(message.raw_parent == frames[2] for message in [reply, *published]),
                    what, [reply, *published],
                )
        front.forget()
        control = front.ask("interrupt_request", channel="control")
        checks.equal((control.reply.content, control.states), ({"status": "ok"}, ["busy", "idle"]),
                     "an interrupt when nothing runs is answered")
        checks.that(front.answers(), "and does not stop what is run afterwards")
        for _ in range(50):
            front.interrupt()
            if front.execute("6 * 7").status != "ok":
                checks.note("an interrupt sent just before a cell stopped that cell: it raced, and that is allowed")
                break
        checks.that(front.answers(), "a cell runs after many interrupts")


def executions(checks, front):
    with checks.about("executions"):
        first = front.execute("1 + 1")
        number = first.reply.content["execution_count"]
        inputs = first.of_kind("execute_input")
        checks.equal([message.content for message in inputs], [{"code": "1 + 1", "execution_count": number}], "the input is told")
        results = first.of_kind("execute_result")
        checks.equal([message.content["execution_count"] for message in results], [number], "what names nothing is an execute_result")
        checks.that(results[0].content["data"]["text/plain"] == "2" and isinstance(results[0].content["metadata"], dict),
                    "with its text", results)
        kinds = [message.kind for message in first.published]
        checks.equal(kinds, ["status", "execute_input", "execute_result", "status"], "in this order")
        checks.that(first.reply.content["payload"] == [] and first.reply.content["user_expressions"] == {},
                    "the reply has its fields", first.reply)

        defined = front.execute("strength = 3 ± 1 W/m2\nstrength")
        shown = defined.of_kind("display_data")
        checks.that(len(shown) == 1 and shown[0].content["transient"]["display_id"], "what names something is a display with an id", shown)
        checks.equal(sorted(shown[0].content["data"]), ["text/html", "text/plain"], "a quantity is html and text")
        checks.equal(defined.reply.content["execution_count"], number + 1, "the count goes up by one")

        figure = front.execute("clock = 1850..1860 CE by 1 yr\nconstant(3 W/m2)").of_kind("display_data")
        types = {kind for message in figure for kind in message.content["data"]}
        checks.that({"image/svg+xml", "text/plain", "text/html"} <= types, "a series is a figure, a table and text", types)
        if "application/pdf" not in types:
            checks.note("no application/pdf in the bundle yet")

        unstored = front.execute("2 + 2", store_history=False)
        checks.equal(unstored.reply.content["execution_count"], number + 2, "without store_history the count stays")
        checks.that("4" in unstored.words, "and the result is there")
        silent = front.execute("quiet = 5\nquiet", silent=True)
        checks.equal([message.kind for message in silent.published], ["status", "status"], "a silent cell shows nothing")
        checks.that(front.execute("quiet").words.startswith("5"), "and is run")
        checks.equal(front.execute("1").reply.content["execution_count"], number + 4, "and is not counted")
        silent = front.execute("no_such_name", silent=True)
        checks.that(silent.status == "error" and not silent.outputs, "a silent failure is in its reply alone", silent.published)

        asked = front.execute("a = 2 K", user_expressions={"twice": "a * 2", "none": "no_such_name", "odd": "a = 3", "empty": ""})
        answers = asked.reply.content["user_expressions"]
        checks.that(answers["twice"]["status"] == "ok" and answers["twice"]["data"]["text/plain"].startswith("4 K"),
                    "user expressions are evaluated after the cell", answers)
        checks.that(all(answers[name]["status"] == "error" and {"ename", "evalue", "traceback"} <= set(answers[name])
                        for name in ("none", "odd", "empty")), "those that fail say why, each for itself", answers)
        checks.that(front.execute("a").words.startswith("2 K"), "and change nothing")

        failed = front.execute("1 W/m2 + 1 K")
        error = failed.of_kind("error")
        checks.that(failed.status == "error" and len(error) == 1, "a failure is one error", failed.outputs)
        fields = ("ename", "evalue", "traceback")
        checks.equal([error[0].content[name] for name in fields], [failed.reply.content[name] for name in fields],
                     "the error and the reply say the same")
        text = without_colours("\n".join(error[0].content["traceback"]))
        checks.that("^" in text and "1 W/m2 + 1 K" in text and ".rs" not in text and len(text.splitlines()) < 12,
                    "it is short, points at the place, and holds no internals", text)

    with checks.about("cells behind one that fails"):
        def queue(stop):
            front.forget()
            identities = [front.begin("1 W/m2 + 1 K", f"stop-{stop}", stop_on_error=stop)]
            identities += [front.begin(f"{number} + 0", f"behind-{number}") for number in range(3)]
            return [front.finish(identity) for identity in identities]

        stopped = queue(True)
        checks.equal([execution.status for execution in stopped], ["error", "aborted", "aborted", "aborted"], "are not run")
        checks.that(all(execution.states == ["busy", "idle"] and not execution.outputs for execution in stopped[1:]),
                    "they stand between busy and idle and show nothing", [execution.published for execution in stopped[1:]])
        checks.that(front.answers(), "what comes later is run")
        went_on = queue(False)
        checks.equal([execution.status for execution in went_on], ["error", "ok", "ok", "ok"], "are run where stop_on_error is false")


def history(checks, program):
    with checks.about("history"), Kernel(program) as kernel, FrontEnd(kernel) as front:
        inputs = ["1 + 1", "x = 2", "x", "1 + 1", "y = 3 ± 1 µm"]
        for code in inputs:
            front.execute(code)
        front.execute("5 + 5", store_history=False)
        front.execute("6 + 6", silent=True)

        def ask(**fields):
            return front.ask("history_request", {"output": False, "raw": True} | fields).reply.content["history"]

        def texts(**fields):
            return [entry[2] for entry in ask(**fields)]

        checks.equal(texts(hist_access_type="tail", n=100), inputs, "the tail holds all inputs, and no others")
        checks.equal(texts(hist_access_type="tail", n=2), inputs[-2:], "or the last so many")
        checks.equal(texts(hist_access_type="tail", n=0), [], "or none")
        entries = ask(hist_access_type="tail", n=5)
        checks.equal([entry[1] for entry in entries], [1, 2, 3, 4, 5], "each has its number")
        session = entries[0][0]
        checks.equal(texts(hist_access_type="range", session=session, start=2, stop=4), inputs[1:3], "a range ends before its stop")
        checks.equal(texts(hist_access_type="range", session=0, start=1), inputs, "session 0 is this one")
        checks.equal(texts(hist_access_type="range", session=-1, start=0, stop=99), [], "there is none before")
        checks.equal(texts(hist_access_type="search", pattern="*=*"), ["x = 2", "y = 3 ± 1 µm"], "a search takes patterns")
        checks.equal(texts(hist_access_type="search", pattern="*± ? µ?"), ["y = 3 ± 1 µm"], "with one sign for ?")
        checks.equal(texts(hist_access_type="search", pattern="1 + 1", unique=True), ["1 + 1"], "unique tells each once")
        checks.equal(texts(hist_access_type="search", pattern="*", n=2), inputs[-2:], "n takes the last")
        outputs = ask(hist_access_type="tail", n=3, output=True)
        checks.that(outputs[0][2][0] == "x" and outputs[0][2][1].startswith("2"), "outputs are told where asked for", outputs)
        checks.equal(texts(hist_access_type="nonsense"), [], "an unknown kind of access gives nothing")


def comms(checks, front):
    with checks.about("comms"):
        def opened():
            return front.ask("comm_info_request").reply.content["comms"]

        front.forget()
        identity = front.send("comm_open", {"comm_id": "unknown", "target_name": "nobody", "data": {}})
        published = front.until_idle(identity)
        closed = [message.content["comm_id"] for message in published if message.kind == "comm_close"]
        checks.equal(closed, ["unknown"], "one to an unknown target is closed again")
        checks.equal(opened(), {}, "and is not among those open")
        front.send("comm_open", {"comm_id": "relink", "target_name": "rhythmite.relink", "data": {}})
        checks.equal(opened(), {"relink": {"target_name": "rhythmite.relink"}}, "one to a known target stays open")
        other = front.ask("comm_info_request", {"target_name": "other"}).reply.content["comms"]
        checks.equal(other, {}, "only those of the target that is asked for are told")
        front.send("comm_msg", {"comm_id": "relink", "data": {}})
        front.send("comm_msg", {"comm_id": "none", "data": {}})
        front.send("comm_close", {"comm_id": "none", "data": {}})
        front.send("comm_close", {"comm_id": "relink", "data": {}})
        checks.equal(opened(), {}, "it is closed when it is asked to be")


def interrupts(checks, program):
    with checks.about("interrupts"):
        with Kernel(program) as kernel, FrontEnd(kernel) as front:
            front.execute(SETTING, "definitions")
            identity = front.begin(LONG, "work")
            time.sleep(0.4)
            sent = time.monotonic()
            kernel.signal(signal.SIGINT)
            execution = front.finish(identity)
            seconds = execution.published[-1].at - sent
            checks.that(seconds < INTERRUPTED_WITHIN, f"by SIGINT: {seconds * 1000:.0f} ms")
            checks.that(execution.reply.content.get("ename") == "interrupted", "it says so", execution.reply)
            # Another computation, of which nothing is remembered.
            other = LONG.replace("1.2 ±", "1.3 ±")
            identities = [front.begin(other, "work"), front.begin("1 + 1", "behind")]
            time.sleep(0.4)
            front.interrupt()
            statuses = [front.finish(identity).status for identity in identities]
            checks.equal(statuses, ["error", "aborted"], "an interrupt stops what waits behind, too")
            kernel.signal(signal.SIGINT)
            time.sleep(0.2)
            checks.that(kernel.is_alive() and front.answers(), "SIGINT when nothing runs does nothing")


def meanwhile(checks, program):
    with checks.about("answers within 100 ms while a cell is computing"), Kernel(program) as kernel, FrontEnd(kernel) as front:
        front.execute(SETTING, "definitions")
        identity = front.begin(LONG, "work")
        time.sleep(0.3)
        slowest = {}

        def took(what, seconds):
            slowest.setdefault(what, []).append(seconds)

        questions = [
            ("complete_request", {"code": "smo", "cursor_pos": 3}, "shell"),
            ("inspect_request", {"code": "smooth", "cursor_pos": 3, "detail_level": 0}, "shell"),
            ("inspect_request", {"code": "s", "cursor_pos": 1, "detail_level": 0}, "shell"),
            ("is_complete_request", {"code": "smooth("}, "shell"), ("kernel_info_request", {}, "shell"),
            ("history_request", {"hist_access_type": "tail", "n": 10}, "shell"), ("comm_info_request", {}, "shell"),
            ("kernel_info_request", {}, "control"),
        ]
        for _ in range(5):
            for kind, content, channel in questions:
                began = time.monotonic()
                front.reply(front.send(kind, content, channel), channel)
                took(f"{kind} {content.get('code', '')} on {channel}", time.monotonic() - began)
            took("heartbeat", front.beat()[1])
        front.ask("kernel_info_request", channel="control")
        while True:
            try:
                front.receive("iopub", 0.05)
            except NoAnswer:
                break
        own = front.published_for(identity)
        checks.that(not any(message.content.get("execution_state") == "idle" for message in own),
                    "the cell is computing all the while", own[-3:])
        for what, seconds in slowest.items():
            middle = sorted(seconds)[len(seconds) // 2]
            checks.that(middle < ANSWERED_WITHIN, f"{what}: {middle * 1000:.1f} ms, at most {max(seconds) * 1000:.1f} ms")
        states = [message.content["execution_state"] for message in front.published if message.kind == "status"]
        checks.that(states[-1] == "busy", "after an answer the kernel still counts as busy", states[-6:])
        began = time.monotonic()
        front.interrupt()
        front.finish(identity)
        checks.note(f"interrupted after {(time.monotonic() - began) * 1000:.0f} ms")


def progress(checks, program):
    with checks.about("long work says how far it is"), Kernel(program) as kernel, FrontEnd(kernel) as front:
        front.execute(SETTING, "definitions")
        short = front.execute("1 W/m2 * 2", "short")
        checks.that(not any("computing" in plain(message) for message in short.outputs), "short work says nothing")
        began = time.monotonic()
        identity = front.begin(LONG, "work")
        first = front.wait_published(lambda message: message.kind == "display_data")
        after = first.at - began
        checks.that(0.4 < after < 1.2 and "computing" in plain(first), f"after {after:.2f} s", first)
        checks.that("<progress" in first.content["data"].get("text/html", ""), "with a bar", first)
        execution = front.finish(identity, began)
        display = first.content["transient"]["display_id"]
        same = [message for message in execution.of_kind("update_display_data", "display_data")
                if message.content["transient"].get("display_id") == display]
        checks.that(len(same) > 2 and "computing" not in plain(same[-1]), "and the result takes its place", same[-1:])
        between = [later.at - earlier.at for earlier, later in zip(same, same[1:])]
        checks.note(f"told {len(same)} times in {execution.seconds:.1f} s, most often every {sorted(between)[len(between) // 2]:.2f} s")


def endings(checks, program):
    with checks.about("shutdown and restart"):
        for channel, restart in [("control", False), ("control", True), ("shell", False)]:
            with Kernel(program) as kernel, FrontEnd(kernel) as front:
                identity = front.send("shutdown_request", {"restart": restart}, channel)
                reply = front.reply(identity, channel)
                checks.equal(reply.content, {"status": "ok", "restart": restart}, f"restart {restart} on {channel} is answered")
                told = front.wait_published(lambda message: message.kind == "shutdown_reply")
                checks.equal(told.content, {"status": "ok", "restart": restart}, "and told to all")
                checks.equal(kernel.wait(2), 0, "and the kernel ends within 2 s, with 0")
        with Kernel(program) as kernel, FrontEnd(kernel) as front:
            front.execute(SETTING, "definitions")
            front.begin(LONG, "work")
            time.sleep(0.4)
            identity = front.send("shutdown_request", {"restart": False}, "control")
            front.reply(identity, "control")
            checks.equal(kernel.wait(2), 0, "also while a cell is computing")
            checks.that(not list(kernel.temporary.iterdir()), "nothing is left in the folder for temporary files")


def transports(checks, program):
    with checks.about("transports"):
        for words, fields in [("ipc", {"transport": "ipc"}), ("tcp on ::1", {"ip": "::1"})]:
            with Kernel(program, **fields) as kernel, FrontEnd(kernel) as front:
                checks.that(front.answers() and front.beat()[0], f"{words} works")
                front.ask("kernel_info_request", channel="control")
                front.send("shutdown_request", {"restart": False}, "control")
                checks.equal(kernel.wait(), 0, f"{words}: it ends")
                left = [path.name for path in kernel.own.iterdir() if path.name.startswith("ipc")]
                checks.equal(left, [], f"{words}: no socket is left")
        with Kernel(program, connection={"key": ""}) as kernel, FrontEnd(kernel) as front:
            checks.that(front.answers(), "without a key nothing is signed")

    with checks.about("connection files that are refused"):
        for words, fields in [
            ("CURVE", {"curve_publickey": "a", "curve_secretkey": "b"}), ("inproc", {"transport": "inproc"}),
            ("hmac-md5", {"signature_scheme": "hmac-md5"}), ("shell_port", {"shell_port": 0}),
            ("hb_port", {"hb_port": "x"}), ("listen", {"ip": "203.0.113.7"}),
        ]:
            with Kernel(program, connection=fields) as kernel:
                code = kernel.wait()
                said = kernel.words()
                checks.that(code == 2 and words in said and "panicked" not in said and len(said.splitlines()) <= 3,
                            f"{fields}: {said.strip()}", code)
                checks.that(not list(kernel.temporary.iterdir()), "nothing is left in the folder for temporary files")
        with Kernel(program) as first, FrontEnd(first) as front:
            checks.that(front.answers(), "a kernel has its ports")
            with Kernel(program, connection=first.connection) as second:
                code = second.wait()
                checks.that(code == 2 and "in use" in second.words(), f"ports that are taken: {second.words().strip()}", code)
                checks.that(front.answers(), "and the kernel that has them goes on")


def main():
    checks = Checks()
    program = program_from_arguments()
    with Kernel(program) as kernel, FrontEnd(kernel) as front:
        kernel_info(checks, front)
        signatures(checks, kernel, front)
        envelopes(checks, front)
        executions(checks, front)
        comms(checks, front)
    history(checks, program)
    meanwhile(checks, program)
    progress(checks, program)
    endings(checks, program)
    transports(checks, program)
    interrupts(checks, program)
    checks.end()


if __name__ == "__main__":
    main()
