"""What a person does in JupyterLab and Notebook, done in a real Chromium against the real kernel.

Usage: notebook_in_the_browser.py PROGRAM DEMO PICTURES [TEST...]
PROGRAM is the kernel, DEMO the folder of the demo notebook, PICTURES where screenshots are put. Each function whose name
begins with `test_` is a test; it gets a `Scene`.
"""

import base64
import re
import shutil
import subprocess
import sys
import time
import traceback
from pathlib import Path

from browser import Page, laboratory, until, write_notebook

SETTINGS = "clock = 1900..1999 CE by 1 yr\nmembers = 200\nseed = 7"
DRIVER = "driver = sinusoid(11 yr, 0.5 W/m2, crest: 1958 CE)"
STRONGER = "driver = sinusoid(11 yr, 2.5 W/m2, crest: 1958 CE)"
CELLS = [
    SETTINGS,
    DRIVER,
    "driver",
    "warming = respond(driver, two_layer(feedback: 1.2 ± 0.2 W/m2/K))\nwarming",
    "maximum(warming)",
]
SHOWING = [2, 3, 4]
# A minute of work that needs little memory: one number for each member comes of each item.
LONG = "[maximum(respond(driver * (1 ± 0.1), two_layer(feedback: f * (1 ± 0.1)))) for f in [{}] W/m2/K]".format(
    ", ".join(str(step / 100) for step in range(100, 400))
)


class Scene:
    """A server, a browser, and notebooks of one's own."""

    def __init__(self, server, browser, pictures):
        self.server, self.browser, self.pictures = server, browser, pictures
        # The theme is kept from test to test, like all that one chooses.
        shutil.rmtree(server.chosen, ignore_errors=True)
        server.choose()
        self.pages = []

    def page(self, **how):
        page = Page(self.server, self.browser, self.pictures, **how)
        self.pages.append(page)
        return page

    def notebook(self, name, sources=CELLS, **kernel):
        write_notebook(self.server.root / f"{name}.ipynb", sources, **kernel)
        return f"{name}.ipynb"

    def close(self):
        for page in self.pages:
            page.close()
        self.server.delete_kernels()


def shown(page, cells=SHOWING):
    """What stands in some outputs: their text, and the address of their figure, which holds the figure itself."""
    def one(number):
        area = page.cell(number).locator(".jp-OutputArea").first
        return area.inner_text() + "".join(area.locator("img").evaluate_all("all => all.map(one => one.src)"))

    return [one(number) for number in cells]


def all_differ(before, after):
    return all(one != other for one, other in zip(before, after, strict=True))


def check_refreshed_in_place(page, text=STRONGER):
    """Change the driver and see every output that hangs on it change, with no other cell run."""
    before, prompts = shown(page), [page.prompt(number) for number in SHOWING]
    page.write(1, text)
    page.run(1)
    until(lambda: all_differ(before, shown(page)), "the three outputs changed")
    assert [page.prompt(number) for number in SHOWING] == prompts, "no other cell was run"
    assert page.output(1) == "", f"nothing is left to be said: {page.output(1)}"


def test_a_changed_driver_redraws_three_outputs_in_place(scene):
    page = scene.page()
    page.open(scene.notebook("refreshed"))
    page.run_all(len(CELLS))
    page.picture("refreshed-before")
    assert page.cell(2).locator("img").count() == 1 and page.cell(3).locator("img").count() == 1
    check_refreshed_in_place(page)
    page.picture("refreshed-after")


def luminances(page, locator):
    """Darkest, middle and brightest grey of what is seen of an element, 0 to 255."""
    picture = base64.b64encode(locator.screenshot()).decode()
    return page.page.evaluate(
        """async picture => {
          const bitmap = await createImageBitmap(await (await fetch("data:image/png;base64," + picture)).blob());
          const context = new OffscreenCanvas(bitmap.width, bitmap.height).getContext("2d");
          context.drawImage(bitmap, 0, 0);
          const { data } = context.getImageData(0, 0, bitmap.width, bitmap.height);
          const greys = [];
          for (let at = 0; at < data.length; at += 4) greys.push(0.3 * data[at] + 0.6 * data[at + 1] + 0.1 * data[at + 2]);
          greys.sort((one, other) => one - other);
          return [greys[0], greys[greys.length >> 1], greys[greys.length - 1]];
        }""",
        picture,
    )


def test_figures_are_read_in_the_light_and_in_the_dark_theme_and_when_it_is_switched(scene):
    # Whatever the system prefers, the theme of the page decides.
    for scheme in ("light", "dark"):
        page = scene.page(scheme=scheme)
        page.open(scene.notebook(f"themes-{scheme}"))
        page.theme("JupyterLab Light")
        page.run_all(len(CELLS))
        for theme in ("JupyterLab Light", "JupyterLab Dark", "JupyterLab Light"):
            page.theme(theme)
            for number in (2, 3):
                figure = page.cell(number).locator(".jp-OutputArea img").first
                darkest, middle, brightest = luminances(page, figure)
                seen = f"{theme} on a {scheme} system, cell {number}: {darkest:.0f}, {middle:.0f}, {brightest:.0f}"
                if "Dark" in theme:
                    assert middle < 70 and brightest > 170, seen
                else:
                    assert middle > 220 and darkest < 110, seen
            page.picture(f"theme-{theme.split()[-1].lower()}-on-{scheme}")


def test_the_demo_notebook_runs_from_its_first_cell_to_its_last(scene):
    page = scene.page(viewport=(1280, 3200))
    page.open("demo/lake.ipynb")
    page.run_all(11)
    page.picture("demo-light")
    page.theme("JupyterLab Dark")
    page.picture("demo-dark")
    errors = page.page.locator(".jp-RenderedText[data-mime-type='application/vnd.jupyter.error']")
    assert errors.count() == 0, errors.first.inner_text()


def test_highlighting_colours_units_eras_labels_and_functions(scene):
    page = scene.page()
    text = (
        "a = load(\"x.csv\", time: \"year\") |> scale(1 ± 0.3) # 5 yr\n"
        "b = 1850..2020 CE by 1 yr\nc = 11700 ± 50 cal BP\nd = 5 WW/m2\ne = [1, 2] kg/m^2/s\nf(x) = x in degC\ng = 0.3 1/yr"
    )
    page.open(scene.notebook("highlighting", [text]))
    spans = page.cell(0).locator(".cm-line span").evaluate_all(
        "all => all.map(one => [one.textContent, getComputedStyle(one).color])"
    )
    colours = dict(spans)
    units = {colours.get(word) for word in ("CE", "yr", "cal BP", "kg/m^2/s", "degC", "1/yr")}
    assert len(units) == 1 and None not in units, colours
    kinds = ["yr", "time", "load", "1850", '"year"', "±", "by", "# 5 yr", "a"]
    assert len({colours.get(word) for word in kinds if word != "by"}) == len(kinds) - 1, colours
    assert "WW/m2" not in colours, "a unit that does not exist stays plain"
    assert colours["f"] == colours["a"], "a function that is defined is a definition"
    page.picture("highlighting")
    page.open_text("demo/lake.rhy")
    spans = page.page.locator(".jp-FileEditor .cm-line span").evaluate_all(
        "all => all.map(one => [one.textContent, getComputedStyle(one).color])"
    )
    assert dict(spans).get("yr") == colours["yr"], "a script is coloured as a cell is"


def test_completion_shows_names_and_what_they_are(scene):
    page = scene.page()
    page.open(scene.notebook("completion"))
    page.run_all(len(CELLS))
    popup = page.page.locator(".jp-Completer:not(.lm-mod-hidden)")
    for typed, offered in (("re", "respond"), ("5 W", "W"), ("two_layer(feed", "feedback:"), ("wa", "warming")):
        page.write(4, typed)
        page.page.keyboard.press("Tab")
        popup.wait_for()
        kind = {"respond": "function", "W": "unit", "feedback:": "argument", "warming": "name"}[offered]
        item = popup.locator(".jp-Completer-item").filter(has_text=offered).first
        assert kind in item.inner_text(), popup.inner_text()
        page.picture(f"completion-{kind}")
        if offered != "warming":
            page.page.keyboard.press("Escape")
    page.page.keyboard.press("Enter")
    until(lambda: page.cell(4).locator(".cm-content").inner_text().strip() == "warming", "the name is put in")


def test_shift_tab_shows_the_help_with_its_equation_set(scene):
    page = scene.page()
    page.open(scene.notebook("inspection"))
    page.run_all(len(CELLS))
    page.write(4, "respond")
    page.page.keyboard.press("Shift+Tab")
    tooltip = page.page.locator(".jp-Tooltip")
    tooltip.wait_for()
    until(lambda: tooltip.locator("mjx-container, .MathJax").count() > 0, "the equation is set")
    assert "surface temperature that a forcing causes" in tooltip.inner_text()
    page.picture("inspection-function")
    page.page.keyboard.press("Escape")
    page.write(4, "warming")
    page.page.keyboard.press("Shift+Tab")
    until(lambda: "respond(driver" in tooltip.inner_text(), "the definition is shown")
    page.picture("inspection-name")


def test_long_work_shows_its_progress_and_ends_at_once_when_it_is_interrupted(scene):
    page = scene.page()
    settings = "clock = 1000..1999 CE by 1 yr\nmembers = 20000\nseed = 7"
    page.open(scene.notebook("interrupted", [settings, DRIVER, LONG, "1 + 1"]))
    page.run(0)
    page.run(1)
    replies = page.replies
    page.run(2, wait=False)
    until(lambda: "computing" in page.output(2), "progress is shown", 10)
    page.picture("progress")
    begun = time.monotonic()
    page.page.locator("[data-command='notebook:interrupt-kernel'], .jp-ToolbarButtonComponent[title^='Interrupt']").first.click()
    page.wait_replies(replies + 1)
    lasted = time.monotonic() - begun
    assert lasted < 2, f"it took {lasted:.1f} s"
    assert "stopped after" in page.output(2) and "interrupted" in page.output(2), page.output(2)
    page.picture("interrupted")
    page.run(3)
    assert page.output(3).split()[-1] == "2", page.output(3)


def restart(page):
    page.menu("Kernel", "Restart Kernel…")
    page.page.locator(".jp-Dialog .jp-mod-accept").click()
    page.page.wait_for_timeout(500)
    page.wait_idle()


def test_after_a_restart_old_results_are_named_and_all_goes_on_when_they_are_run(scene):
    page = scene.page()
    page.open(scene.notebook("restarted"))
    page.run_all(len(CELLS))
    restart(page)
    page.run(0)
    said = page.output(0)
    assert "started anew" in said and "run cells [3], [4], [5]" in said, said
    page.picture("restarted")
    page.run_all(len(CELLS))
    check_refreshed_in_place(page)


def test_with_the_extension_outputs_are_refreshed_after_a_reload(scene):
    page = scene.page()
    page.open(scene.notebook("reloaded"))
    page.run_all(len(CELLS))
    check_refreshed_in_place(page)
    page.save()
    page.sent.clear()
    page.reload()
    page.page.wait_for_timeout(300)
    assert page.comms_opened() == 1
    check_refreshed_in_place(page, DRIVER)
    # What was refreshed is found again after the next reload, too.
    page.save()
    page.reload()
    page.page.wait_for_timeout(300)
    check_refreshed_in_place(page)
    page.picture("reloaded")
    assert page.own_complaints() == []


def test_with_the_extension_what_a_cell_waits_for_is_told_after_a_reload(scene):
    page = scene.page()
    page.open(scene.notebook("waiting", [SETTINGS, "later = first * 2", "first = 3"]))
    page.run(0)
    page.run(1)
    assert "`first`" in page.output(1), page.output(1)
    page.save()
    page.reload()
    page.page.wait_for_timeout(300)
    page.run(2)
    until(lambda: "all names are defined now" in page.output(1), "the cell that waited says so")


def test_with_the_extension_a_cell_that_was_moved_is_refreshed(scene):
    page = scene.page()
    page.open(scene.notebook("moved"))
    page.run_all(len(CELLS))
    page.cell(3).locator(".jp-InputPrompt").first.click()
    page.page.keyboard.press("x")
    page.cell(0).locator(".jp-InputPrompt").first.click()
    page.page.keyboard.press("v")
    until(lambda: "warming" in page.cell(1).locator(".cm-content").inner_text(), "the cell was moved")
    before = shown(page, [1])
    page.write(2, STRONGER)
    page.run(2)
    until(lambda: all_differ(before, shown(page, [1])), "the moved output changed")


def test_with_the_extension_another_page_of_the_notebook_is_refreshed_too(scene):
    page = scene.page()
    page.open(scene.notebook("twice"))
    page.run_all(len(CELLS))
    page.save()
    other = scene.page()
    other.open("twice.ipynb")
    before = shown(other)
    page.write(1, STRONGER)
    page.run(1)
    until(lambda: all_differ(before, shown(other)), "the outputs on the other page changed")


def test_without_the_extension_a_reload_is_no_lie(scene):
    extension = scene.server.data / "labextensions"
    aside = scene.server.work / "extension-aside"
    shutil.move(extension, aside)
    try:
        page = scene.page()
        page.open(scene.notebook("plain"))
        page.run_all(len(CELLS))
        check_refreshed_in_place(page)
        page.save()
        page.reload()
        assert page.comms_opened() == 0
        before = shown(page)
        page.write(1, DRIVER)
        page.run(1)
        said = page.output(1)
        assert "drawn before this change: run cells [3], [4], [5]" in said, said
        assert shown(page) == before, "the page has lost the links"
        page.picture("reloaded-plain")
        # Once they are run, they are refreshed again.
        for number in SHOWING:
            page.run(number)
        check_refreshed_in_place(page)
    finally:
        shutil.move(aside, extension)


def test_no_other_kernel_ever_sees_our_comm(scene):
    page = scene.page()
    page.open(scene.notebook("other", ["1 + 1"], kernel="python3", language="python"))
    page.run(0)
    page.page.wait_for_timeout(300)
    assert page.output(0).strip().endswith("2")
    assert page.comms_opened() == 0
    assert page.own_complaints() == []


def test_notebook_7_refreshes_highlights_and_finds_outputs_again(scene):
    page = scene.page()
    page.open(scene.notebook("seven"), in_notebook=True)
    page.run_all(len(CELLS))
    check_refreshed_in_place(page)
    page.save()
    page.reload()
    page.page.wait_for_timeout(300)
    check_refreshed_in_place(page, DRIVER)
    assert page.cell(0).locator(".cm-line span", has_text=re.compile("^CE$")).count() == 1
    page.picture("notebook-7")
    assert page.own_complaints() == []


def main():
    program, demo, pictures = sys.argv[1], Path(sys.argv[2]), Path(sys.argv[3])
    tests = {name: test for name, test in globals().items() if name.startswith("test_")}
    wanted = sys.argv[4:] or list(tests)

    def prepare(server):
        subprocess.run([program, "enrol"], env=server.environment(), check=True, stdout=subprocess.DEVNULL)
        shutil.copytree(demo, server.root / "demo")

    failed = 0
    with laboratory(pictures, prepare) as (server, browser):
        for name in wanted:
            scene = Scene(server, browser, pictures)
            begun = time.monotonic()
            try:
                tests[name](scene)
                print(f"ok      {name} ({time.monotonic() - begun:.1f} s)", flush=True)
            except Exception:
                failed += 1
                print(f"FAILED  {name}\n{traceback.format_exc()}", flush=True)
                for number, page in enumerate(scene.pages):
                    page.picture(f"failed-{name}-{number}")
                    print("\n".join(page.own_complaints()), flush=True)
            scene.close()
    print(f"{len(wanted) - failed} passed, {failed} failed")
    sys.exit(failed > 0)


if __name__ == "__main__":
    main()
