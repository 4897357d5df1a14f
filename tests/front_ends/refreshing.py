"""A notebook that is never stale: what is refreshed in place, and what is said where that is not possible.

    refreshing.py PROGRAM
"""

import statistics
import time

from conversation import Checks, Execution, FrontEnd, Kernel, Page, program_from_arguments


class Notebook:
    """A kernel of its own and a page on it."""

    def __init__(self, program, **fields):
        self.kernel = Kernel(program, **fields)

    def __enter__(self):
        self.front = FrontEnd(self.kernel)
        self.front.meet()
        self.page = Page(self.front)
        self.run = self.page.run
        self.shows = self.page.shows
        self.says = self.page.says
        return self

    def __exit__(self, *_):
        self.front.close()
        self.kernel.__exit__()


def refreshed_in_place(checks, program):
    with checks.about("what depends on a driver is refreshed where it stands"), Notebook(program) as book:
        book.run("driver", "sun = 1 W/m2\nclock = 1850..1860 CE by 1 yr")
        book.run("double", "double = sun * 2\ndouble")
        book.run("series", "constant(double)")
        book.run("other", "haze = 3 K\nhaze\n1 + 1")
        execution = book.run("driver", "sun = 5 W/m2\nclock = 1850..1860 CE by 1 yr")
        checks.that("10 W/m2" in book.shows("double"), "the quantity is new", book.shows("double"))
        checks.that("first 10, last 10 W/m2" in book.shows("series"), "and so is the figure with its numbers", book.shows("series"))
        checks.that("3 K" in book.shows("other"), "what does not depend on it stays")
        checks.that("refreshed by sun" in book.shows("double"), "it says what moved it", book.shows("double"))
        updates = execution.of_kind("update_display_data")
        checks.equal(len(updates), 3, "so many updates as outputs moved: a quantity, a figure and its numbers")
        checks.that(all(update.metadata is not None and update.content["metadata"]["rhythmite"]["refreshed_by"] == ["sun"]
                        for update in updates), "their metadata say it, too", updates)
        checks.that(execution.published[-1].kind == "status" and all(update.at >= execution.reply.at - 0.005 for update in updates),
                    "they come for the running cell, before idle")
        order = [update.content["metadata"]["rhythmite"]["expression"] for update in updates]
        checks.equal(order, ["double", "constant(double)", "constant(double)"], "what others follow from comes first")
        checks.equal(book.shows("driver"), "", "the cell itself shows nothing")
        book.run("several", "sun * 3\nsun * 4")
        before = book.shows("several")
        book.run("driver", "sun = 6 W/m2\nclock = 1850..1860 CE by 1 yr")
        after = book.shows("several")
        checks.that("sun * 3" in before and "sun * 3" in after and "24 W/m2" in after,
                    "where a cell shows several results, each keeps its expression", [before, after])
        book.run("several", "")
        book.run("driver", "sun = 5 W/m2\nclock = 1850..1860 CE by 1 yr")
        same = book.run("driver", "sun = (5 W/m2)   # the same\nclock = 1850..1860 CE by 1 yr")
        checks.equal(same.outputs, [], "what means the same moves nothing")
        several = book.run("driver", "sun = 6 W/m2\nclock = 1850..1870 CE by 1 yr")
        checks.that("21 steps" in book.shows("series") and "refreshed by" in book.says("series"),
                    "a setting moves what reads it, and the figure says so", book.says("series"))
        moved = several.of_kind("update_display_data")[-1].content["metadata"]["rhythmite"]["refreshed_by"]
        checks.equal(sorted(moved), ["clock", "sun"], "and all that moved a result is named")
        book.run("kinds", "kind = constant(1 K)")
        book.run("shown", "kind")
        book.run("kinds", "kind = 7 K")
        checks.that("7 K" in book.shows("shown") and "Line chart" not in book.shows("shown"),
                    "a figure that is a quantity now leaves no figure", book.shows("shown"))
        book.run("kinds", "kind = constant(8 K)")
        checks.that("first 8, last 8 K" in book.shows("shown"), "and comes back", book.shows("shown"))
        book.run("function", "strong(x) = x * 2")
        book.run("used", "strong(4 K)")
        book.run("function", "strong(x) = x * 3")
        checks.that("12 K" in book.shows("used") and "refreshed by strong" in book.shows("used"), "functions count as drivers", book.shows("used"))


def changed_files(checks, program):
    with checks.about("a file that changed"), Notebook(program) as book:
        file = book.kernel.folder / "record.csv"
        file.write_text("year,temperature (degC)\n1850,1\n1851,2\n1852,3\n")
        book.run("load", 'record = load("record.csv")\nrecord')
        time.sleep(0.02)
        file.write_text("year,temperature (degC)\n1850,1\n1851,2\n1852,9\n")
        book.run("other", "1 + 1")
        checks.that("last 9" in book.shows("load"), "is looked at again with each cell", book.shows("load"))
        checks.that("refreshed by record.csv" in book.says("load"), "and named", book.says("load"))
        file.unlink()
        book.run("other", "1 + 2")
        checks.that("error" in book.shows("load") and "last 9" not in book.shows("load"), "one that is gone is a mistake in place", book.shows("load"))


def forward_references(checks, program):
    with checks.about("names that come later"), Notebook(program) as book:
        waits = book.run("uses", "z = y * 2")
        checks.that(waits.status == "ok" and "`y` is not defined yet" in book.shows("uses"), "a definition waits and says for what", book.shows("uses"))
        shown = book.run("shows", "z")
        checks.that(shown.status == "error" and "`y` is not defined yet" in book.shows("shows"), "shown, it is a mistake", book.shows("shows"))
        book.run("unrelated", "u = 1")
        defined = book.run("defines", "y = 5 K")
        checks.that("not defined" not in book.shows("uses"), "what waited says that it has what it waited for", book.shows("uses"))
        number = shown.reply.content["execution_count"]
        checks.that(f"run cell [{number}] again" in book.shows("defines"), "a mistake that would be none is listed to be run again", book.shows("defines"))
        again = book.run("shows", "z")
        checks.that(again.status == "ok" and "10 K" in book.shows("shows"), "which it then is not any more")
        later = book.run("defines", "y = 6 K")
        checks.that("12 K" in book.shows("shows") and "run cell" not in book.shows("defines"), "and nothing is listed twice", [later.words])
        book.run("one cell", "total\ntotal = part * 2\npart = 4")
        checks.that(book.shows("one cell").startswith("8"), "within a cell the order is free", book.shows("one cell"))


def failing_and_healing(checks, program):
    with checks.about("a display that fails now, and heals"), Notebook(program) as book:
        book.run("driver", "sun = 1 W/m2\nhaze = 2 W/m2")
        book.run("sum", "sun + haze")
        failed = book.run("driver", "sun = 1 K\nhaze = 2 W/m2")
        checks.equal(failed.status, "ok", "the cell with the change succeeds")
        checks.that("error[unit-mismatch]" in book.shows("sum"),
                    "the display shows its error in place", book.shows("sum"))
        checks.that("3 W/m2" not in book.shows("sum"), "and not the old number")
        book.run("driver", "sun = 4 W/m2\nhaze = 2 W/m2")
        checks.that("6 W/m2" in book.shows("sum") and "error" not in book.shows("sum"), "it heals in place", book.shows("sum"))
        book.run("driver", "haze = 2 W/m2")
        checks.that("`sun` is not defined" in book.shows("sum"), "a name that its cell gives up is gone", book.shows("sum"))
        book.run("driver", "sun = = 3")
        checks.that("`sun` is not defined" in book.shows("sum"), "a cell that cannot be read installs nothing", book.shows("sum"))
        book.run("driver", "sun = 7 W/m2\nhaze = 2 W/m2")
        checks.that("9 W/m2" in book.shows("sum") and "run cell" not in book.shows("driver"), "and comes back", book.shows("sum"))
        book.run("driver", "clock = 1850..1860 CE by 1 yr\nsun = constant(1 W/m2)\nhaze = 2 W/m2")
        checks.that("first 3, last 3" in book.shows("sum"), "a quantity that becomes a series is drawn", book.shows("sum"))
        book.run("driver", "sun = constant(1 W/m2)\nhaze = 2 W/m2")
        checks.that("error[no-clock]" in book.shows("sum") and "Line chart" not in book.shows("sum"), "its figure does not stay beside a mistake", book.shows("sum"))


def homes(checks, program):
    with checks.about("names that move between cells"), Notebook(program) as book:
        book.run("first", "x = 1 K")
        book.run("shown", "x * 2")
        moved = book.run("second", "x = 5 K")
        checks.that("10 K" in book.shows("shown"), "the second cell takes the name over", book.shows("shown"))
        checks.that("`x`" in book.shows("second") and "cell [1]" in book.shows("second"), "and says who had it", book.shows("second"))
        checks.note(f"it says: {book.shows('second')!r}")
        book.run("second", "y = 1 K")
        told = book.shows("shown") + book.shows("second")
        checks.that("not defined" in book.shows("shown") or "2 K" in book.shows("shown"),
                    "the second cell gives it up: it is not its old value", told)
        checks.note(f"then the display shows {book.shows('shown').splitlines()[:1]}")
        book.run("first", "x = 1 K")
        checks.that("2 K" in book.shows("shown"), "the first cell, run again, has it again", book.shows("shown"))

    with checks.about("cells run twice"), Notebook(program) as book:
        book.run("driver", "x = 1 K")
        first = book.run("shown", "x\nx * 2")
        second = book.run("shown", "x * 3")
        checks.that("3 K" in book.shows("shown"), "the new text counts")
        execution = book.run("driver", "x = 2 K")
        known = {message.content["transient"]["display_id"] for message in second.outputs}
        updated = {message.content["transient"]["display_id"] for message in execution.of_kind("update_display_data")}
        checks.equal(updated, known, "only what stands there now is refreshed")
        old = {message.content["transient"]["display_id"] for message in first.outputs}
        checks.that(not old & known, "and has a display id of its own")
        for _ in range(3):
            again = book.run("shown", "x * 3")
        checks.equal(len(again.outputs), 1, "nothing is added to by running again")
        failing = book.run("shown", "x + 1 W/m2")
        book.run("shown", "x * 3")
        healed = book.run("driver", "x = 3 W/m2")
        checks.that("run cell" not in book.shows("driver"), "a mistake of an earlier run is forgotten", [failing.status, healed.words])


def deleted_cells(checks, program):
    with checks.about("cells that were deleted"), Notebook(program) as book:
        book.run("driver", "x = 1 K")
        book.run("shown", "x * 2")
        book.page.delete("driver")
        book.run("other", "x * 3", gone=["driver"])
        checks.that("3 K" in book.shows("other"), "their definitions stay", book.shows("other"))
        checks.that("deleted" in book.shows("other"), "and what depends on them says so", book.shows("other"))
        checks.that("deleted" in book.shows("shown"), "also where it stood before", book.shows("shown"))
        book.page.delete("shown")
        update = book.run("anew", "x = 2 K", gone=["driver", "shown"])
        checks.that("6 K" in book.shows("other") and "deleted" not in book.shows("other"), "a new home heals that", book.shows("other"))
        said = book.shows("anew")
        checks.that("[2]" not in said or "as far as they are still there" in said, "of displays in deleted cells nothing is said for certain", said)
        checks.note(f"it says: {said!r}")
        checks.that(update.status == "ok", "the cell is run")
        book.run("shown", "x * 2")
        book.run("anew", "x = 3 K")
        checks.that("6 K" in book.shows("shown"), "a cell that was cut and pasted, and run, is refreshed again", book.shows("shown"))


def nameless_cells(checks, program):
    with checks.about("batch runners, which name no cells"), Notebook(program) as book:
        front = book.front
        page = book.page
        for number, code in enumerate(["x = 1 K", "x * 2", "y = x * 3\ny", "x = 5 K"]):
            page.take(f"{number}", front.execute(code))
        checks.that("10 K" in page.shows("1") and "15 K" in page.shows("2"), "their displays are refreshed", [page.shows("1"), page.shows("2")])
        checks.equal(page.shows("3"), "", "a name that is bound again is told to nobody there")
        page.take("4", front.execute("later * 2"))
        page.take("5", front.execute("later = 4 K"))
        checks.that("not defined" in page.shows("4"), "a name that comes later is a mistake when it is shown", page.shows("4"))
        checks.note(f"then it says: {page.shows('5')!r}")


def reload(checks, program):
    for relinks in (False, True):
        words = "with the lab extension" if relinks else "without the lab extension"
        with checks.about(f"a page that was loaded again, {words}"), Notebook(program) as book:
            book.run("driver", "x = 1 K")
            shown = book.run("shown", "x * 2\nx * 5")
            other = book.run("other", "clock = 1850..1860 CE by 1 yr\nconstant(x)")
            with FrontEnd(book.kernel) as again:
                page = book.page.loaded_again(again, relinks)
                page.run("driver", "x = 4 K")
                said = page.shows("driver")
                numbers = [execution.reply.content["execution_count"] for execution in (shown, other)]
                cells = ", ".join(f"[{number}]" for number in numbers)
                if relinks:
                    checks.that("8 K" in page.shows("shown") and "20 K" in page.shows("shown"), "displays go on being refreshed", page.shows("shown"))
                    checks.that("before this change" not in said, "and nothing needs to be said", said)
                else:
                    checks.that("2 K" in page.shows("shown"), "the page has lost its links")
                    checks.that(f"3 results were drawn before this change: run cells {cells}" in said,
                                "what cannot be reached is said in the cell that was run", said)
                    page.run("shown", "x * 2\nx * 5")
                    page.run("driver", "x = 6 K")
                    checks.that("12 K" in page.shows("shown"), "a cell that was run since is refreshed", page.shows("shown"))
                    said = page.shows("driver")
                    checks.that(f"[{numbers[1]}]" in said and f"[{numbers[0]}]" not in said and "1 result was" in said, "and is not named any more", said)
                quiet = page.run("unrelated", "q = 1")
                checks.equal(quiet.words, "", "a cell that moves nothing says nothing")


def restart(checks, program):
    with checks.about("a kernel that is started anew"), Notebook(program) as book:
        book.run("driver", "x = 1 K")
        book.run("shown", "x * 2")
        book.run("series", "clock = 1850..1860 CE by 1 yr\nconstant(x)")
        front = book.front
        front.reply(front.send("shutdown_request", {"restart": True}, "control"), "control")
        checks.equal(book.kernel.wait(), 0, "it ends when it is asked to")
        book.kernel.start()
        with FrontEnd(book.kernel) as again:
            page = book.page.loaded_again(again)
            page.run("driver", "x = 2 K")
            said = page.shows("driver")
            checks.that("started anew" in said and "2 cells hold results from before" in said and "[2], [3]" in said,
                        "it says which cells hold results from before", said)
            page.run("driver", "x = 3 K")
            checks.that("started anew" not in page.shows("driver"), "once", page.shows("driver"))
            again.reply(again.send("shutdown_request", {"restart": False}, "control"), "control")
            book.kernel.wait()
            left = [path.name for path in book.kernel.own.iterdir() if path.name.endswith(".rhythmite.json")]
            checks.equal(left, [], "no file stays beside the connection file when it is ended for good")
        book.kernel.start()
        with FrontEnd(book.kernel) as later:
            page = book.page.loaded_again(later)
            page.run("driver", "x = 3 K")
            checks.note(f"after an end for good and a new start it says: {page.shows('driver')!r}")

    with checks.about("a kernel that died and is started anew"), Notebook(program) as book:
        book.run("driver", "x = 1 K")
        book.run("shown", "x * 2")
        book.kernel.process.kill()
        book.kernel.wait()
        book.kernel.start()
        with FrontEnd(book.kernel) as again:
            page = book.page.loaded_again(again)
            page.run("driver", "x = 2 K")
            checks.that("1 cell holds results from before: run cell [2]" in page.shows("driver"), "it says so, too", page.shows("driver"))
        left = [path.name for path in book.kernel.temporary.iterdir()]
        checks.that(len(left) <= 2, "of the one that was killed no more than its folder is left", left)

    with checks.about("a kernel that ends by SIGTERM"), Notebook(program) as book:
        book.run("driver", "x = 1 K")
        book.run("shown", "x * 2")
        book.kernel.process.terminate()
        checks.that(book.kernel.wait() is not None, "ends")
        checks.equal([path.name for path in book.kernel.temporary.iterdir()], [], "and leaves nothing behind")


# A display that takes a tenth of a second or more.
SETTING = "members = 1000\nclock = 1..2000 CE by 1 yr"
SLOW = "respond(scale(s, {}), two_layer(feedback: 1.2 ± 0.2 W/m2/K))"


def interrupted_refresh(checks, program):
    with checks.about("an interrupt while displays are refreshed"), Notebook(program) as book:
        book.run("settings", SETTING)
        book.run("driver", "s = sinusoid(100 yr, 1 W/m2, 1000 CE)")
        for number in range(12):
            book.run(f"shown {number}", SLOW.format(number + 1))
        book.run("quick", "sin = s |> within(1..10 CE)\nsin")
        numbers = {f"shown {number}": 3 + number for number in range(12)}
        identity = book.front.begin("s = sinusoid(100 yr, 2 W/m2, 1000 CE)", "driver")
        began = time.monotonic()
        reply = book.front.reply(identity)
        time.sleep(0.15)
        sent = time.monotonic()
        book.front.interrupt()
        execution = Execution(reply, book.front.until_idle(identity), began)
        seconds = execution.published[-1].at - sent
        checks.that(reply.content["status"] == "ok" and reply.at - began < 0.3, "the reply is out before the refreshing", reply.at - began)
        checks.that(seconds < 0.2, f"idle after {seconds * 1000:.0f} ms")
        book.page.take("driver", execution)
        waiting = [cell for cell in numbers if "waits" in book.shows(cell)]
        checks.that(len(waiting) >= 2, "those that were not refreshed say that they wait", [book.shows(cell) for cell in numbers])
        said = book.shows("driver")
        checks.that("wait" in said and all(f"[{numbers[cell]}]" in said for cell in waiting), "and the cell that was run says which", said)
        checks.that(not any("interrupted" in book.shows(cell) for cell in numbers), "none shows the interrupt as a mistake of its own",
                    [book.shows(cell) for cell in numbers])
        book.run("other", "1 + 1", seconds=60)
        checks.that(not any("wait" in book.shows(cell) for cell in numbers), "the next cell makes up for it", [book.shows(cell)[-200:] for cell in numbers])
        checks.that(all("refreshed by s" in book.says(cell) for cell in numbers), "and each says what moved it",
                    [book.says(cell)[-300:] for cell in numbers])


def postponed_refresh(checks, program):
    with checks.about("a cell that waits goes before the refreshing"), Notebook(program) as book:
        front = book.front
        book.run("settings", SETTING)
        book.run("driver", "s = sinusoid(100 yr, 1 W/m2, 1000 CE)")
        for number in range(2):
            book.run(f"shown {number}", SLOW.format(number + 1))
        first = front.begin("s = sinusoid(100 yr, 2 W/m2, 1000 CE)", "driver")
        second = front.begin("1 + 1", "other")
        executions = [(cell, front.finish(identity, seconds=60)) for cell, identity in [("driver", first), ("other", second)]]
        for cell, execution in executions:
            book.page.take(cell, execution)
        checks.that(len(executions[0][1].of_kind("update_display_data")) <= 4, "the first cell refreshes at most what it had begun")
        shown = [book.says(f"shown {number}") for number in range(2)]
        checks.that(all("refreshed by s" in text for text in shown), "all is refreshed when the last is done", [text[-200:] for text in shown])
        checks.that("wait" not in book.shows("driver") + book.shows("other"), "and nothing is said to wait", [book.shows("driver"), book.shows("other")])
        last = executions[1][1]
        checks.that(last.reply.at < last.published[-1].at, "the reply of the second came before")

    with checks.about("many changes in a row, as `Run All` sends them"), Notebook(program) as book:
        cells = {"driver": "x = 1 K"} | {f"shown {number}": f"x * {number + 1}" for number in range(8)} | {"after": "y = 2\ny"}
        for value in (1, 2, 3):
            cells["driver"] = f"x = {value} K"
            identities = {cell: book.front.begin(code, cell) for cell, code in cells.items()}
            executions = {cell: book.front.finish(identity) for cell, identity in identities.items()}
            for cell, execution in executions.items():
                book.page.take(cell, execution)
        checks.that(all(book.shows(f"shown {number}").startswith(f"{3 * (number + 1)} K") for number in range(8)),
                    "leave every display true", [book.shows(f"shown {number}") for number in range(8)])
        checks.that(all(execution.status == "ok" for execution in executions.values()), "and every cell is run")


def many_displays(checks, program):
    with checks.about("30 displays that hang on one driver"), Notebook(program) as book:
        book.run("driver", "x = 1 K")
        for number in range(30):
            book.run(f"shown {number}", f"x * {number + 1}")
        seconds = []
        for value in range(2, 23):
            execution = book.run("driver", f"x = {value} K")
            seconds.append(execution.seconds)
            if len(execution.of_kind("update_display_data")) != 30:
                checks.that(False, "30 updates", execution.published)
        checks.that(all(book.shows(f"shown {number}").startswith(f"{22 * (number + 1)} K") for number in range(30)), "all are true")
        middle = statistics.median(seconds)
        checks.that(middle < 0.1, f"within 100 ms: {middle * 1000:.1f} ms, at most {max(seconds) * 1000:.1f} ms")


def main():
    checks = Checks()
    program = program_from_arguments()
    for scene in (
        refreshed_in_place, changed_files, forward_references, failing_and_healing, homes, deleted_cells, nameless_cells,
        reload, restart, interrupted_refresh, postponed_refresh, many_displays,
    ):
        scene(checks, program)
    checks.end()


if __name__ == "__main__":
    main()
