"""What was not checked for want of a tool stands at the end of the run, not only among the skipped tests."""

import pytest

from tests.documents.tools import MISSING


def pytest_terminal_summary(terminalreporter: pytest.TerminalReporter) -> None:
    if MISSING:
        terminalreporter.section("documents: NOT CHECKED", sep="!", red=True)
        for what, tests in sorted(MISSING.items()):
            terminalreporter.line(f"missing {what}:")
            for test in sorted(tests):
                terminalreporter.line(f"    {test}")
