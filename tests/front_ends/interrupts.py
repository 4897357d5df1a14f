"""An interrupt ends any work within 200 ms, at any point of any function, and the session stays usable.

    interrupts.py PROGRAM [WORK…]

WORK are beginnings of the names below; without any, all are tried.
"""

import sys
import time

from conversation import Checks, FrontEnd, Kernel, NoAnswer, program_from_arguments
from protocol import INTERRUPTED_WITHIN, LONG, SETTING

# What takes long, by what computes it: definitions, the expression that is shown, and whether it is hard to stop.
LONG_CLOCK = "clock = 5000..0 ka by 0.001 kyr\ns = sinusoid(100 kyr, 1 W/m2, 0 ka)"
WORK = {
    "respond with members": (SETTING, LONG),
    "attribute with members": (
        "members = 10000\nclock = 1..1500 CE by 1 yr\nu = sinusoid(33 yr, 1 ± 0.1 W/m2, 1000 CE)\nv = ramp(1..1500 CE, 1 ± 0.2 W/m2)",
        "attribute(scale(u, 1 ± 0.1) + v + sinusoid(7 yr, 1 ± 0.1 W/m2, 1000 CE), to: [u, v], method: generalised_least_squares, "
        "noise: ar1(0.4, per: 1 yr))"),
    "medians and ranges": (SETTING, "constant(1 ± 0.1 W/m2) |> scale(1 ± 0.1)"),
    "sinusoid": (LONG_CLOCK, "sinusoid(41 kyr, 1 W/m2, 0 ka)"),
    "smooth": (LONG_CLOCK, "s |> smooth(500 kyr)"),
    "smooth, gaussian": (LONG_CLOCK, "s |> smooth(500 kyr, window: gaussian)"),
    "lag": (LONG_CLOCK, "s |> lag(1 kyr)"),
    "cumulate": (LONG_CLOCK, "cumulate(s)"),
    "rate": (LONG_CLOCK, "rate(s)"),
    "detrend": (LONG_CLOCK, "detrend(s)"),
    "standardise": (LONG_CLOCK, "standardise(s)"),
    "quantile": (LONG_CLOCK, "quantile(s, 0.3)"),
    "operators": (LONG_CLOCK, "s + s * 2 - s / 3 + s * 5 - s * 7"),
    "respond": (LONG_CLOCK, "respond(s, two_layer())"),
    "attribute": (LONG_CLOCK, "attribute(s + sinusoid(11 kyr, 1 W/m2, 0 ka), to: [s, sinusoid(33 kyr, 1 W/m2, 0 ka)])"),
    "load": ("", 'load("large.csv")'),
    "load, in a definition": ("", 'large = load("large.csv")'),
    "load_table": ("", 'load_table("large.csv")'),
    "many definitions": ("", "\n".join(["v0 = 1 W/m2", *(f"v{n} = {n} W/m2 + v{n - 1}" for n in range(1, 4000))])),
    "many results": ("", "\n".join(f"{n} W/m2 + {n} W/m2" for n in range(10_000))),
    "many mistakes": ("", "\n".join(f"{n} W/m2 + {n} K" for n in range(5_000))),
    "a long line": ("", ("[" + ", ".join(str(n) for n in range(9_000)) + "] ppm\n") * 30),
}


def write_large_file(folder):
    with (folder / "large.csv").open("w") as file:
        file.write("year,forcing (W/m2)\n")
        for row in range(1_500_000):
            file.write(f"{500 + row / 1000:.6f},{row * 7919 % 10007 / 1000:.4f}\n")


def interrupts(checks, program, chosen):
    with checks.about("an interrupt ends any work within 200 ms, and the session stays usable"):
        for name, (definitions, expression) in WORK.items():
            if chosen and not any(name.startswith(begin) for begin in chosen):
                continue
            with Kernel(program) as kernel, FrontEnd(kernel) as front:
                if "large.csv" in expression:
                    write_large_file(kernel.folder)
                if definitions:
                    made = front.execute(definitions, "definitions")
                    if made.status != "ok":
                        checks.that(False, f"{name}: its definitions", made.words)
                        continue
                identity = front.begin(expression, "work")
                try:
                    front.until_idle(identity, 0.4)
                    done = front.finish(identity)
                    checks.note(f"{name}: done ({done.status}) before it could be interrupted {done.words[:200]}")
                    continue
                except NoAnswer:
                    pass
                sent = time.monotonic()
                front.interrupt()
                execution = front.finish(identity, seconds=120)
                seconds = execution.published[-1].at - sent
                ending = execution.reply.content.get("ename", "ok")
                checks.that(seconds < INTERRUPTED_WITHIN and (ending == "interrupted" or execution.status == "ok"),
                            f"{name}: {seconds * 1000:.0f} ms, {ending}")
                checks.that(front.answers(), f"{name}: a cell runs afterwards")


def main():
    checks = Checks()
    interrupts(checks, program_from_arguments(), sys.argv[2:])
    checks.end()


if __name__ == "__main__":
    main()
