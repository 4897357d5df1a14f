"""The tests that the Jupyter project has for kernels, with every attribute filled that this one supports.

    conformance.py PROGRAM
"""

import sys
import unittest

from conversation import enrolled, program_from_arguments

import jupyter_kernel_test

# What the language does not have, and so no kernel for it can do. Anything else that is skipped is a failure.
LEFT_OUT = {
    "test_execute_stdout": "the language has no print: what a cell gives are results, also a text in quotes",
    "test_execute_stderr": "nothing writes to an error stream: mistakes are errors, notes stand with their result",
    "test_pager": "there is no pager: help is asked for by Shift+Tab",
    "test_clear_output": "no output is taken away: results are refreshed in place",
}


class KernelTest(jupyter_kernel_test.KernelTests):
    kernel_name = "rhythmite"
    language_name = "rhythmite"
    file_extension = ".rhy"

    code_execute_result = [
        {"code": "1 + 1", "result": "2"},
        {"code": "21 ka in BCE", "result": "19051 BCE"},
        {"code": '"hello, world"', "result": "hello, world"},
        {"code": "1.8 ppm in ppb", "mime": "text/html"},
    ]
    # Each display of a cell must hold the type; the figure of a series and its numbers are two displays.
    code_display_data = [
        {"code": "strength = 3 ± 1 W/m2\nstrength", "mime": "text/html"},
        {"code": "strength = 3 ± 1 W/m2\nstrength", "mime": "text/plain"},
        {"code": "clock = 1850..1860 CE by 1 yr\nconstant(3 W/m2)", "mime": "text/plain"},
    ]
    code_generate_error = "1 W/m2 + 1 K"
    code_inspect_sample = "smooth"

    completion_samples = [
        {"text": "smo", "matches": {"smooth("}},
        {"text": "no_such_name_at_al", "matches": set()},
        {"text": "smooth("},
    ]
    complete_code_samples = ["1 + 1", "x = 3 W/m2", "f(x) = x * 2", "# only a comment", "x = [1, 2] ppm\nx"]
    incomplete_code_samples = ["constant(", "[1, 2,", "x =", "1 +"]
    invalid_code_samples = ["1 + )", "x = = 2", "'text'", "3 3"]

    code_history_pattern = "1?+*"
    supported_history_operations = ("tail", "range", "search")


class Result(unittest.TextTestResult):
    succeeded = 0

    def addSuccess(self, test):
        super().addSuccess(test)
        self.succeeded += 1


def main():
    program = program_from_arguments()
    with enrolled(program):
        suite = unittest.defaultTestLoader.loadTestsFromTestCase(KernelTest)
        result = unittest.TextTestRunner(sys.stdout, verbosity=2, resultclass=Result).run(suite)
    failed = len(result.failures) + len(result.errors)
    for test, _ in result.skipped:
        name = test.id().rsplit(".", 1)[-1]
        if name in LEFT_OUT:
            print(f"left out: {name}: {LEFT_OUT[name]}")
        else:
            print(f"FAILED: {name} was skipped, and should not be")
            failed += 1
    print(f"{result.succeeded} passed, {failed} failed")
    sys.exit(1 if failed else 0)


main()
