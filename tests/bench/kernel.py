"""The kernel beside a Python kernel, in one run: how fast it starts and answers, and what memory it takes.

    kernel.py PROGRAM [--runs 500] [--starts 5] [--json FILE]

PROGRAM is the program, built with `cargo build --release`. It needs the environment of tests/front_ends.

start    the process launched, to the first kernel_info_reply; the first start is cold only if the files were not read
         before (`--drop-caches` sees to that, as root), the others are warm and their median is told
reply    execute_request sent, to its execute_reply; `and idle` to the end of its work, too
memory   of the process and its children (RSS; PSS shares pages with others), after the start and after the runs
refresh  a driver changed on which 30 displays hang, to idle; the values cost nothing, so that it is all overhead
"""

import argparse
import json
import os
import statistics
import sys
import time
from pathlib import Path
from queue import Empty

sys.path.insert(0, str(Path(__file__).resolve().parent.parent / "front_ends"))

import psutil
from conversation import FrontEnd, Kernel, enrolled
from jupyter_client.manager import KernelManager

DISPLAYS = 30


def percentile(values, percent):
    values = sorted(values)
    return values[min(len(values) - 1, round(percent / 100 * (len(values) - 1)))]


def start(name):
    """Start a kernel; returns its manager, a client and the seconds until it answered."""
    manager = KernelManager(kernel_name=name)
    began = time.perf_counter()
    with open(os.devnull, "w") as nowhere:
        manager.start_kernel(stdout=nowhere, stderr=nowhere)
    client = manager.blocking_client()
    client.start_channels()
    client.kernel_info()
    while client.get_shell_msg(timeout=60)["msg_type"] != "kernel_info_reply":
        pass
    seconds = time.perf_counter() - began
    for _ in range(50):  # publications arrive only once the subscription has
        client.kernel_info()
        try:
            client.get_iopub_msg(timeout=0.2)
            break
        except Empty:
            pass
    for get in (client.get_iopub_msg, client.get_shell_msg):
        try:
            while True:
                get(timeout=0.15)
        except Empty:
            pass
    return manager, client, seconds


def memory_mib(manager):
    process = psutil.Process(manager.provisioner.pid)
    infos = [child.memory_full_info() for child in (process, *process.children(recursive=True))]
    return {"rss": round(sum(info.rss for info in infos) / 2**20, 1), "pss": round(sum(info.pss for info in infos) / 2**20, 1)}


def run(client, code):
    """Run a cell; returns the seconds to its reply and to its end."""
    began = time.perf_counter()
    identity = client.execute(code, store_history=True)
    while True:
        reply = client.get_shell_msg(timeout=30)
        if reply["parent_header"].get("msg_id") == identity:
            break
    replied = time.perf_counter() - began
    if reply["content"]["status"] != "ok":
        raise SystemExit(f"{code} failed: {reply['content']}")
    while True:
        message = client.get_iopub_msg(timeout=30)
        if (message["parent_header"].get("msg_id") == identity and message["msg_type"] == "status"
                and message["content"]["execution_state"] == "idle"):
            return replied, time.perf_counter() - began


def measure(name, runs, starts, drop_caches):
    if drop_caches:
        os.sync()
        Path("/proc/sys/vm/drop_caches").write_text("3")
    seconds = []
    for number in range(starts):
        manager, client, took = start(name)
        seconds.append(took)
        if number < starts - 1:
            client.stop_channels()
            manager.shutdown_kernel(now=True)
    at_start = memory_mib(manager)
    for _ in range(20):
        run(client, "1+1")
    times = [run(client, "1+1") for _ in range(runs)]
    afterwards = memory_mib(manager)
    began = time.perf_counter()
    manager.shutdown_kernel()
    ended = time.perf_counter() - began
    client.stop_channels()

    def spread(values):
        return {name: round(percentile(values, percent) * 1e3, 2) for name, percent in [("p50", 50), ("p95", 95), ("p99", 99)]}

    return {
        "start_first_s": round(seconds[0], 3), "start_warm_s": round(statistics.median(seconds[1:] or seconds), 3),
        "reply_ms": spread([replied for replied, _ in times]), "reply_and_idle_ms": spread([whole for _, whole in times]),
        "memory_at_start_mib": at_start, "memory_after_runs_mib": afterwards, "shutdown_s": round(ended, 3),
    }


def refresh(program, expression, setting):
    """The seconds to refresh the displays of one driver, for each of 40 changes."""
    with Kernel(program) as kernel, FrontEnd(kernel) as front:
        front.execute(f"{setting}\nx = 1 K", "driver")
        for number in range(DISPLAYS):
            front.execute(expression.format(number + 1), f"shown {number}")
        seconds = []
        for value in range(2, 42):
            execution = front.execute(f"{setting}\nx = {value} K", "driver")
            updated = {message.content["metadata"]["rhythmite"]["expression"] for message in execution.of_kind("update_display_data")}
            if len(updated) != DISPLAYS:
                raise SystemExit(f"{len(updated)} of {DISPLAYS} displays were refreshed")
            seconds.append(execution.seconds)
            front.forget()
    return {"p50": round(statistics.median(seconds) * 1e3, 2), "p95": round(percentile(seconds, 95) * 1e3, 2)}


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("program")
    parser.add_argument("--runs", type=int, default=500)
    parser.add_argument("--starts", type=int, default=5)
    parser.add_argument("--json")
    parser.add_argument("--drop-caches", action="store_true")
    arguments = parser.parse_args()
    program = str(Path(arguments.program).resolve())
    with enrolled(program):
        found = {name: measure(name, arguments.runs, arguments.starts, arguments.drop_caches) for name in ("rhythmite", "python3")}
    found["refresh_of_30_quantities_ms"] = refresh(program, "x * {}", "")
    found["refresh_of_30_figures_ms"] = refresh(program, "constant(x * {})", "clock = 1850..2020 CE by 1 yr")
    ours, theirs = found["rhythmite"], found["python3"]
    found["times"] = {
        "start_warm": round(theirs["start_warm_s"] / ours["start_warm_s"], 1),
        "reply_p50": round(theirs["reply_ms"]["p50"] / ours["reply_ms"]["p50"], 1),
        "memory_after_runs": round(theirs["memory_after_runs_mib"]["rss"] / ours["memory_after_runs_mib"]["rss"], 1),
    }
    found["load_average"] = [round(value, 1) for value in os.getloadavg()]
    print(json.dumps(found, indent=1))
    if arguments.json:
        Path(arguments.json).write_text(json.dumps(found, indent=1) + "\n")


main()
