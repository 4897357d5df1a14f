"""The demo notebook in batch runners, converters and the console.

    batch.py PROGRAM [FOLDER WITH THE DEMO]
"""

import copy
import re
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import nbformat
import papermill
import pexpect
import psutil
from nbclient import NotebookClient
from nbconvert import HTMLExporter, LatexExporter, MarkdownExporter, PDFExporter
from papermill.translators import Translator, papermill_translators

from conversation import Checks, enrolled, gone, program_from_arguments, without_colours

DEMO = Path(__file__).resolve().parent.parent.parent / "notebooks-demo"
KERNEL = {"name": "rhythmite", "display_name": "Rhythmite", "language": "rhythmite"}


def read(path):
    notebook = nbformat.read(path, as_version=4)
    notebook.metadata.kernelspec = KERNEL
    return notebook


def executed(notebook, folder):
    notebook = copy.deepcopy(notebook)
    NotebookClient(notebook, kernel_name="rhythmite", timeout=300, resources={"metadata": {"path": str(folder)}}).execute()
    return notebook


def code_cells(notebook):
    return [cell for cell in notebook.cells if cell.cell_type == "code"]


def texts(cell):
    """The outputs of a cell as text; where a result was drawn anew says so beside it, which is no part of it."""
    found = []
    for output in cell.outputs:
        text = output.get("data", {}).get("text/plain", output.get("evalue", ""))
        text = re.sub(r", refreshed by .*", "", without_colours(text)).strip()
        if text:
            found.append(text)
    return found


def run_by_program(program, notebook, folder):
    """The same notebook as the program itself runs it, without any front end."""
    source = folder / "by_program.ipynb"
    nbformat.write(notebook, source)
    run = subprocess.run([program, "run", str(source), "--format", "ipynb"], capture_output=True, text=True, check=False)
    source.unlink()
    return nbformat.reads(run.stdout, as_version=4)


def in_nbclient(checks, program, folder):
    with checks.about("nbclient"):
        source = read(folder / "lake.ipynb")
        whole = done = executed(source, folder)
        cells = code_cells(done)
        outputs = [output for cell in cells for output in cell.outputs]
        checks.that(not any(output.output_type == "error" for output in outputs), "no cell ends in an error", outputs[:1])
        checks.equal([cell.execution_count for cell in cells], list(range(1, len(cells) + 1)), "all cells are run, in order")
        nbformat.validate(done)
        checks.that(True, "the notebook validates")
        own = code_cells(run_by_program(program, source, folder))
        silent = [cell.id for cell, other in zip(cells, own) if bool(cell.outputs) != bool(other.outputs)]
        checks.equal(silent, [], "the same cells have outputs as when the program runs it by itself")
        for cell, other in zip(cells, own):
            if texts(cell) != texts(other):
                checks.that(False, f"{cell.id}: the outputs are those of the program", [texts(cell), texts(other)])
                break
        else:
            checks.that(True, "and all their texts are the same")
        types = {kind for output in outputs for kind in output.get("data", {})}
        checks.that({"text/plain", "text/html", "image/svg+xml"} <= types, "figures, tables and text are kept", types)
        alone = [output for output in outputs if "image/svg+xml" in output.get("data", {}) and not output.data.get("text/plain")]
        checks.equal(len(alone), 0, "every figure has words in its place")

    with checks.about("nbclient: a driver that changes in the last cell"):
        changed = copy.deepcopy(source)
        changed.cells.append(nbformat.v4.new_code_cell('haze = load("data/haze.csv") |> scale(0.5 ± 0.1)'))
        again = executed(changed, folder)
        own = code_cells(run_by_program(program, changed, folder))
        stale = [(cell.id, texts(cell), texts(other)) for cell, other in zip(code_cells(again), own) if texts(cell) != texts(other)]
        # A name that is bound again is told by the program, and not where cells have no name.
        stale = [found for found in stale if found[0] != again.cells[-1].id]
        checks.equal(stale, [], "no output is stale in what is saved")
        moved = [cell.id for cell, before in zip(code_cells(again), cells) if texts(cell) != texts(before)]
        checks.that(len(moved) >= 3, f"and these moved: {moved}")
        nbformat.validate(again)

    with checks.about("nbclient: a mistake"):
        wrong = copy.deepcopy(source)
        wrong.cells = [nbformat.v4.new_code_cell(code) for code in ("x = 1 K", "x + 1 W/m2", "x * 2")]
        try:
            executed(wrong, folder)
            checks.that(False, "is an error")
        except Exception as error:
            words = without_colours(str(error))
            checks.that("unit-mismatch" in words and "^" in words, "is an error, with its place", words)
        for cell in wrong.cells:
            cell.metadata.tags = ["raises-exception"]
        done = executed(wrong, folder)
        checks.that(texts(done.cells[2])[0].startswith("2 K"), "where errors are allowed, what follows is run", texts(done.cells[2]))
    return whole


def in_nbconvert(checks, done, folder):
    with checks.about("nbconvert"):
        html, _ = HTMLExporter().from_notebook_node(done)
        checks.that(html.count("data:image/svg+xml") + html.count("<svg") >= 3 and "<table" in html, "HTML holds figures and tables")
        without_words = re.findall(r"<img(?![^>]*\balt=)[^>]*>", html)
        checks.equal(len(without_words), 0, "every figure in it has an alternative text")
        markdown, resources = MarkdownExporter().from_notebook_node(done)
        files = [name for name in resources["outputs"] if name.endswith(".svg")]
        checks.that(len(files) >= 3 and all(Path(name).name in markdown for name in files), "Markdown holds links to its figures", files)
        types = {kind for cell in code_cells(done) for output in cell.outputs for kind in output.get("data", {})}
        if "application/pdf" not in types:
            checks.that(False, "figures are there as PDF, too", types)
            return
        if not shutil.which("pandoc"):
            checks.note("there is no pandoc: LaTeX is made of the code cells alone")
            done = copy.deepcopy(done)
            done.cells = code_cells(done)
        latex, resources = LatexExporter().from_notebook_node(done)
        figures = [name for name in resources["outputs"] if name.endswith(".pdf")]
        checks.that(len(figures) >= 3 and all(Path(name).name in latex for name in figures), "LaTeX takes the figures as they are, without inkscape", figures)
        if shutil.which("xelatex") and shutil.which("pandoc"):
            pdf, _ = PDFExporter().from_notebook_node(done, {"metadata": {"path": str(folder)}})
            checks.that(pdf.startswith(b"%PDF"), "and becomes a PDF")
        else:
            checks.note("there is no xelatex with pandoc: LaTeX is not made into a PDF")


class RhythmiteTranslator(Translator):
    """Papermill's parameters as definitions. Numbers and texts need no more; anything else is written as it stands."""

    @classmethod
    def translate_str(cls, val):
        return val if val[:1].isdigit() else '"' + val.replace("\\", "\\\\").replace('"', '\\"') + '"'

    @classmethod
    def translate_list(cls, val):
        return f"[{', '.join(cls.translate(item) for item in val)}]"

    @classmethod
    def comment(cls, cmt_str):
        return f"# {cmt_str}".strip()

    @classmethod
    def assign(cls, name, str_val):
        return f"{name} = {str_val}"


def in_papermill(checks, program, folder):
    with checks.about("papermill"):
        papermill_translators.register("rhythmite", RhythmiteTranslator)
        source = read(folder / "lake.ipynb")
        settings = next(cell for cell in code_cells(source) if "members" in cell.source)
        settings.metadata.tags = ["parameters"]
        nbformat.write(source, folder / "parameters.ipynb")
        papermill.execute_notebook(
            str(folder / "parameters.ipynb"), str(folder / "parameters-done.ipynb"),
            parameters={"members": 200, "seed": 3, "clock": "1850..2020 CE by 1 yr"}, cwd=str(folder), progress_bar=False,
            log_output=False,
        )
        done = nbformat.read(folder / "parameters-done.ipynb", as_version=4)
        nbformat.validate(done)
        cells = code_cells(done)
        injected = [cell for cell in cells if "injected-parameters" in cell.metadata.get("tags", [])]
        checks.that(len(injected) == 1 and "members = 200" in injected[0].source, "parameters are put in as definitions", injected)
        checks.that(not any(output.output_type == "error" for cell in cells for output in cell.outputs), "no cell ends in an error")
        checks.equal(injected[0].outputs, [], "they say nothing of their own")
        defined = subprocess.run(
            [program, "run", str(folder / "lake.ipynb"), "--format", "ipynb", "--define", "members = 200", "--define", "seed = 3"],
            capture_output=True, text=True, check=False,
        )
        own = {cell.id: cell for cell in code_cells(nbformat.reads(defined.stdout, as_version=4))}
        other = [(cell.id, texts(cell), texts(own[cell.id])) for cell in cells
                 if cell.id in own and cell.id != settings.id and texts(cell) != texts(own[cell.id])]
        checks.equal(other[:1], [], "the results are those of --define")


def in_the_console(checks, folder):
    with checks.about("jupyter_console"):
        console = pexpect.spawn(
            sys.executable, ["-m", "jupyter_console", "--kernel=rhythmite", "--simple-prompt"], cwd=str(folder),
            encoding="utf-8", timeout=60, dimensions=(200, 400),
        )
        try:
            console.expect(r"In \[1\]: ")
            checks.that("Rhythmite" in console.before, "says what it talks to", console.before)
            outputs = ""
            number = 1
            for cell in code_cells(read(folder / "lake.ipynb")):
                for line in cell.source.splitlines():
                    if not line.strip() or line.strip().startswith("#"):
                        continue
                    console.sendline(line)
                    number += 1
                    console.expect(rf"In \[{number}\]: ")
                    outputs += without_colours(console.before)
            checks.that("error[" not in outputs, "runs the lines of the demo", outputs[-2000:])
            checks.that("generalised least squares" in outputs and "171 steps" in outputs, "and shows their results", outputs[-2000:])
            console.sendline("1 W/m2 + 1 K")
            console.expect(rf"In \[{number + 1}\]: ")
            words = without_colours(console.before)
            checks.that("W/m2 and K measure different things" in words and "^" in words, "a mistake has its place", words)
            kernels = psutil.Process(console.pid).children(recursive=True)
            console.kill(signal.SIGKILL)
            end = time.monotonic() + 2
            while not all(gone(kernel.pid) for kernel in kernels) and time.monotonic() < end:
                time.sleep(0.05)
            checks.that(len(kernels) == 1 and gone(kernels[0].pid), "a console that is killed leaves no kernel behind", kernels)
        finally:
            console.close(force=True)


def main():
    checks = Checks()
    program = program_from_arguments()
    with enrolled(program) as own:
        folder = own / "demo"
        shutil.copytree(Path(sys.argv[2]) if len(sys.argv) > 2 else DEMO, folder)
        done = in_nbclient(checks, program, folder)
        in_nbconvert(checks, done, folder)
        in_papermill(checks, program, folder)
        in_the_console(checks, folder)
    checks.end()


if __name__ == "__main__":
    main()
