"""A kernel, a front end that speaks the protocol by itself, and a list of what holds: what these tests are written with.

The front end is written on ZeroMQ alone, so that it can also say what no decent front end says: badly signed messages,
half messages, wrong types. `Page` keeps outputs by the rules by which JupyterLab keeps them.
"""

import contextlib
import hashlib
import hmac
import json
import os
import re
import signal
import socket
import subprocess
import sys
import tempfile
import time
import traceback
import uuid
from datetime import datetime, timezone
from pathlib import Path

import zmq

DELIMITER = b"<IDS|MSG>"
PATIENCE = 30.0  # seconds after which an answer is taken not to come


class Checks:
    """What was checked; each check is printed, and the sum at the end."""

    def __init__(self):
        self.passed = 0
        self.failed = 0

    def that(self, holds, what, seen=""):
        """Check that something holds; `seen` is printed where it does not."""
        if holds:
            self.passed += 1
            print(f"  holds   {what}", flush=True)
        else:
            self.failed += 1
            print(f"  FAILED  {what}" + (f"\n          seen: {seen}" if seen != "" else ""), flush=True)
        return bool(holds)

    def open(self, holds, what):
        """Something that is known not to hold yet; once it does, this must become a check."""
        if holds:
            self.that(False, f"{what} (it holds now: make this a check)")
        else:
            print(f"  OPEN    {what}", flush=True)

    def equal(self, seen, expected, what):
        return self.that(seen == expected, what, f"{seen!r}, not {expected!r}")

    def note(self, words):
        print(f"          {words}", flush=True)

    @contextlib.contextmanager
    def about(self, subject):
        """Checks that belong together; one that cannot be made does not stop those that follow the block."""
        print(subject, flush=True)
        try:
            yield
        except Exception as error:
            self.failed += 1
            print(f"  FAILED  this could not be checked to the end: {error!r}", flush=True)
            print("".join(traceback.format_tb(error.__traceback__)[-2:]), flush=True)

    def end(self):
        """Print the sum and leave with the exit code that says it."""
        print(f"{self.passed} passed, {self.failed} failed", flush=True)
        sys.exit(1 if self.failed else 0)


def program_from_arguments():
    """The path of the program under test, from the command line."""
    if len(sys.argv) < 2:
        sys.exit(f"usage: {sys.argv[0]} PROGRAM")
    return str(Path(sys.argv[1]).resolve())


@contextlib.contextmanager
def enrolled(program):
    """Make the kernel known to Jupyter by a folder of its own, for as long as the block lasts."""
    with tempfile.TemporaryDirectory(prefix="front-ends-") as folder:
        spec = Path(folder) / "data" / "kernels" / "rhythmite"
        spec.mkdir(parents=True)
        (spec / "kernel.json").write_text(json.dumps({
            "argv": [program, "kernel", "{connection_file}"], "display_name": "Rhythmite", "language": "rhythmite",
            "interrupt_mode": "message",
        }))
        before = dict(os.environ)
        os.environ |= {
            "JUPYTER_PATH": str(Path(folder) / "data"), "JUPYTER_RUNTIME_DIR": str(Path(folder) / "runtime"),
            "JUPYTER_CONFIG_DIR": str(Path(folder) / "config"), "JUPYTER_DATA_DIR": str(Path(folder) / "own"),
            "IPYTHONDIR": str(Path(folder) / "ipython"), "JUPYTER_PLATFORM_DIRS": "1",
        }
        try:
            yield Path(folder)
        finally:
            os.environ.clear()
            os.environ.update(before)


def free_ports(number, ip="127.0.0.1"):
    family = socket.AF_INET6 if ":" in ip else socket.AF_INET
    probes = [socket.socket(family) for _ in range(number)]
    for probe in probes:
        probe.bind((ip, 0))
    ports = [probe.getsockname()[1] for probe in probes]
    for probe in probes:
        probe.close()
    return ports


class Kernel:
    """A kernel of its own process, with a notebook folder and a folder for temporary files of its own."""

    def __init__(self, program, transport="tcp", ip="127.0.0.1", connection=None, folder=None, environment=None):
        self.program = program
        self._own = tempfile.TemporaryDirectory(prefix="front-ends-")
        self.own = Path(self._own.name)
        self.folder = Path(folder) if folder else self.own / "notebook"
        self.temporary = self.own / "temporary"
        self.folder.mkdir(exist_ok=True)
        self.temporary.mkdir()
        names = ["shell_port", "iopub_port", "stdin_port", "control_port", "hb_port"]
        if transport == "ipc":
            ip, ports = str(self.own / "ipc"), range(1, 6)
        else:
            ports = free_ports(5, ip)
        self.connection = dict(zip(names, ports)) | {
            "ip": ip, "transport": transport, "key": uuid.uuid4().hex, "signature_scheme": "hmac-sha256",
            "kernel_name": "rhythmite",
        }
        self.connection |= connection or {}
        self.file = self.own / "kernel.json"
        self.file.write_text(json.dumps(self.connection))
        self.environment = os.environ | {"TMPDIR": str(self.temporary)} | (environment or {})
        self.start()

    def start(self):
        """Start the process; also again, with the same connection file."""
        self.log = (self.own / "log").open("ab")
        self.process = subprocess.Popen(
            [self.program, "kernel", str(self.file)], cwd=self.folder, env=self.environment, stdin=subprocess.DEVNULL,
            stdout=self.log, stderr=subprocess.STDOUT,
        )

    def words(self):
        """What the kernel wrote on its standard output and error."""
        return (self.own / "log").read_text(errors="replace")

    def is_alive(self):
        return self.process.poll() is None

    def signal(self, number):
        self.process.send_signal(number)

    def memory_kib(self, kind="VmRSS"):
        status = Path(f"/proc/{self.process.pid}/status").read_text()
        return int(re.search(rf"{kind}:\s+(\d+)", status)[1])

    def wait(self, seconds=5.0):
        """Wait for the end of the process; its exit code, or nothing where it goes on."""
        try:
            return self.process.wait(seconds)
        except subprocess.TimeoutExpired:
            return None

    def __enter__(self):
        return self

    def __exit__(self, *_):
        if self.is_alive():
            self.process.terminate()
            if self.wait() is None:
                self.process.kill()
                self.process.wait()
        self.log.close()
        self._own.cleanup()


class NoAnswer(Exception):
    """Something did not come in time."""


class Message:
    """One message, with the time at which it was taken from its socket."""

    def __init__(self, frames, key):
        self.at = time.monotonic()
        position = frames.index(DELIMITER)
        self.identities, signature, parts = frames[:position], frames[position + 1], frames[position + 2:]
        self.header, self.parent, self.metadata, self.content = (json.loads(part) for part in parts[:4])
        self.raw_parent = parts[1]
        expected = hmac.new(key, b"".join(parts[:4]), hashlib.sha256).hexdigest().encode() if key else b""
        self.well_signed = signature == expected
        self.kind = self.header["msg_type"]

    def __repr__(self):
        return f"{self.kind} {json.dumps(self.content)[:300]}"


class Execution:
    """What came of a request on the shell channel: its reply, and what was published for it until it was done."""

    def __init__(self, reply, published, began):
        self.reply = reply
        self.published = published
        self.began = began

    def of_kind(self, *kinds):
        return [message for message in self.published if message.kind in kinds]

    @property
    def status(self):
        return self.reply.content["status"]

    @property
    def states(self):
        return [message.content["execution_state"] for message in self.of_kind("status")]

    @property
    def outputs(self):
        return self.of_kind("execute_result", "display_data", "update_display_data", "error", "stream")

    @property
    def words(self):
        """All outputs as text."""
        return "\n".join(plain(message) for message in self.outputs)

    @property
    def seconds(self):
        """From the request to the end of the work for it."""
        return self.published[-1].at - self.began


def plain(message):
    """The plain text of an output, as a terminal would show it without its colours."""
    if message.kind == "error":
        return without_colours("\n".join(message.content["traceback"]) or message.content["evalue"])
    return without_colours(message.content.get("data", {}).get("text/plain", message.content.get("text", "")))


def without_colours(text):
    return re.sub(r"\x1b\[[0-9;]*m", "", text)


class FrontEnd:
    """A client of a kernel, by sockets of its own."""

    def __init__(self, kernel, session=None):
        self.connection = kernel.connection
        self.key = self.connection["key"].encode()
        self.session = session or uuid.uuid4().hex
        self.context = zmq.Context.instance()
        self.sockets = {}
        self.published = []
        identity = uuid.uuid4().bytes.replace(b"\0", b"\1")
        for name, kind in [("shell", zmq.DEALER), ("control", zmq.DEALER), ("stdin", zmq.DEALER), ("iopub", zmq.SUB),
                           ("hb", zmq.REQ)]:
            socket = self.context.socket(kind)
            socket.linger = 0
            socket.rcvhwm = socket.sndhwm = 0
            socket.ipv6 = True
            if kind == zmq.DEALER:
                socket.identity = identity
            if kind == zmq.SUB:
                socket.subscribe(b"")
            socket.connect(self.place(f"{name}_port"))
            self.sockets[name] = socket

    def place(self, port):
        ip, number = self.connection["ip"], self.connection[port]
        if self.connection["transport"] == "ipc":
            return f"ipc://{ip}-{number}"
        return f"tcp://[{ip}]:{number}" if ":" in ip else f"tcp://{ip}:{number}"

    def close(self):
        for socket in self.sockets.values():
            socket.close()

    def __enter__(self):
        self.meet()
        return self

    def __exit__(self, *_):
        self.close()

    def meet(self):
        """Wait until the kernel answers and its publications arrive."""
        end = time.monotonic() + PATIENCE
        while time.monotonic() < end:
            identity = self.send("kernel_info_request", {})
            self.reply(identity)
            with contextlib.suppress(NoAnswer):
                self.until_idle(identity, seconds=0.3)
                break
        else:
            raise NoAnswer("no publications arrive")
        with contextlib.suppress(NoAnswer):
            while True:
                self.receive("iopub", 0.1)
        self.published.clear()

    # -- To the kernel --

    def frames(self, kind, content, metadata=None, header=None, key=None):
        """The frames of a message, and its id; `header` replaces fields, and those of `None` are left out."""
        identity = uuid.uuid4().hex
        whole = {
            "msg_id": identity, "session": self.session, "username": "somebody", "msg_type": kind, "version": "5.4",
            "date": datetime.now(timezone.utc).isoformat().replace("+00:00", "Z"),
        } | (header or {})
        whole = {name: value for name, value in whole.items() if value is not None}
        parts = [as_json(part) for part in (whole, {}, {} if metadata is None else metadata, content)]
        return [DELIMITER, self.signature(parts, key), *parts], identity

    def signature(self, parts, key=None):
        key = self.key if key is None else key
        return hmac.new(key, b"".join(parts), hashlib.sha256).hexdigest().encode() if key else b""

    def send(self, kind, content, channel="shell", **alterations):
        frames, identity = self.frames(kind, content, **alterations)
        self.sockets[channel].send_multipart(frames)
        return identity

    def send_frames(self, frames, channel="shell"):
        self.sockets[channel].send_multipart(frames)

    # -- From the kernel --

    def receive(self, channel, seconds=PATIENCE):
        if not self.sockets[channel].poll(max(0, seconds) * 1000):
            raise NoAnswer(f"nothing on {channel} within {seconds:.1f} s")
        frames = self.sockets[channel].recv_multipart()
        if channel == "iopub":
            message = Message(frames, self.key)
            self.published.append(message)
            return message
        return Message(frames, self.key)

    def reply(self, identity, channel="shell", seconds=PATIENCE):
        """The reply to a request; replies to others that come before are left aside."""
        end = time.monotonic() + seconds
        while True:
            message = self.receive(channel, end - time.monotonic())
            if message.parent.get("msg_id") == identity:
                return message

    def until_idle(self, identity, seconds=PATIENCE):
        """What is published for a request, up to the end of its work."""
        end = time.monotonic() + seconds
        while True:
            own = self.published_for(identity)
            if own and own[-1].kind == "status" and own[-1].content["execution_state"] == "idle":
                return own
            self.receive("iopub", end - time.monotonic())

    def published_for(self, identity):
        return [message for message in self.published if message.parent.get("msg_id") == identity]

    def wait_published(self, condition, seconds=PATIENCE):
        """Wait for a publication for which a condition holds."""
        end = time.monotonic() + seconds
        while True:
            message = self.receive("iopub", end - time.monotonic())
            if condition(message):
                return message

    def forget(self):
        """Let go of what was published so far."""
        self.published.clear()

    # -- Whole exchanges --

    def ask(self, kind, content=None, channel="shell", seconds=PATIENCE, **alterations):
        """Send a request and wait for its reply and its end."""
        began = time.monotonic()
        identity = self.send(kind, {} if content is None else content, channel, **alterations)
        reply = self.reply(identity, channel, seconds)
        published = self.until_idle(identity, seconds)
        return Execution(reply, published, began)

    def begin(self, code, cell=None, gone=(), metadata=None, **fields):
        """Send a cell to be run; `cell` is its id in the notebook, where the front end has one."""
        content = {
            "code": code, "silent": False, "store_history": True, "user_expressions": {}, "allow_stdin": False,
            "stop_on_error": True,
        } | fields
        own = {"cellId": cell, "deletedCells": list(gone), "trusted": True} if cell is not None else {}
        return self.send("execute_request", content, metadata=own | (metadata or {}))

    def finish(self, identity, began=None, seconds=PATIENCE):
        """Wait for the reply to a cell that was sent, and its end."""
        reply = self.reply(identity, seconds=seconds)
        return Execution(reply, self.until_idle(identity, seconds), began or time.monotonic())

    def execute(self, code, cell=None, seconds=PATIENCE, **fields):
        began = time.monotonic()
        return self.finish(self.begin(code, cell, **fields), began, seconds)

    def interrupt(self):
        return self.send("interrupt_request", {}, "control")

    def beat(self, seconds=PATIENCE):
        """Send a heartbeat; whether it came back as it was, and after how many seconds."""
        began = time.monotonic()
        self.sockets["hb"].send(b"ping")
        if not self.sockets["hb"].poll(seconds * 1000):
            raise NoAnswer("no heartbeat")
        return self.sockets["hb"].recv() == b"ping", time.monotonic() - began

    def answers(self, seconds=PATIENCE):
        """Whether the kernel still runs a cell."""
        try:
            result = self.execute("6 * 7", seconds=seconds)
        except NoAnswer:
            return False
        return result.status == "ok" and "42" in result.words


def as_json(part):
    return part if isinstance(part, bytes) else json.dumps(part).encode()


class Page:
    """The outputs of a notebook as an open page keeps them.

    Only `display_data` is registered under its display id, and the register is the page's memory: it is empty after the
    page was loaded again, while the outputs are still there. The lab extension reads the ids from the outputs instead.
    """

    def __init__(self, front_end, relinks=False):
        self.front_end = front_end
        self.relinks = relinks
        self.outputs = {}  # by cell, each a list of [display id, message]
        if relinks:
            self.comm()

    def comm(self):
        self.front_end.send("comm_open", {"comm_id": uuid.uuid4().hex, "target_name": "rhythmite.relink", "data": {}})
        # It has no reply: what is asked next is answered after it.
        self.front_end.ask("kernel_info_request")

    def run(self, cell, code, **fields):
        execution = self.front_end.execute(code, cell, **fields)
        self.take(cell, execution)
        return execution

    def take(self, cell, execution):
        self.outputs[cell] = []
        for message in execution.outputs:
            display = message.content.get("transient", {}).get("display_id")
            if message.kind == "update_display_data":
                for held in self.outputs.values():
                    for output in held:
                        if output[0] == display:
                            output[1] = message
            else:
                self.outputs[cell].append([display if message.kind == "display_data" else None, message])

    def loaded_again(self, front_end, relinks=False):
        """The same notebook in a page that was loaded again."""
        page = Page(front_end, relinks)
        for cell, held in self.outputs.items():
            page.outputs[cell] = [[display if relinks else None, message] for display, message in held]
        return page

    def shows(self, cell):
        """What stands in the outputs of a cell, as text."""
        return "\n".join(text for _, message in self.outputs.get(cell, []) if (text := plain(message)))

    def says(self, cell):
        """What stands in the outputs of a cell as text and within its figures."""
        figures = [message.content.get("data", {}).get("image/svg+xml", "") for _, message in self.outputs.get(cell, [])]
        return "\n".join([self.shows(cell), *figures])

    def delete(self, cell):
        self.outputs.pop(cell)


def threads_of(process):
    return len(list(Path(f"/proc/{process}/task").iterdir()))


def gone(process):
    """Whether a process is not there any more (a zombie counts as gone)."""
    try:
        return Path(f"/proc/{process}/stat").read_text().rsplit(")", 1)[1].split()[0] == "Z"
    except (FileNotFoundError, ProcessLookupError):
        return True


def end_process(process):
    with contextlib.suppress(ProcessLookupError):
        os.kill(process, signal.SIGKILL)
