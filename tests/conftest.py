"""What all tests share. With STABCHECK_TEST_WHEEL set, a run that does not see an installed wheel stops at once."""

import os
import signal
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

import stabcheck

PACKAGE = Path(stabcheck.__file__).parent


def pytest_sessionstart(session: pytest.Session) -> None:
    if os.environ.get("STABCHECK_TEST_WHEEL") and "site-packages" not in PACKAGE.parts:
        raise pytest.UsageError(f"the wheel was to be tested, but stabcheck is {PACKAGE}")
    if signal.getsignal(signal.SIGINT) is signal.SIG_IGN:
        # A shell starts what is put into its background deaf to Ctrl-C, and every process below inherits that.
        signal.signal(signal.SIGINT, signal.default_int_handler)


@pytest.fixture(scope="session")
def project() -> Path:
    """The folder that holds README.md, scenarios/ and tests/."""
    return Path(__file__).parent.parent


@pytest.fixture(scope="session")
def package() -> Path:
    """The folder of the package that is tested: the checkout's or the installed wheel's."""
    return PACKAGE


@pytest.fixture(scope="session")
def run_python() -> Callable[..., subprocess.CompletedProcess[str]]:
    """Run a piece of Python in a fresh interpreter that finds the same stabcheck as this one."""
    return _run_python


def _run_python(code: str, *arguments: str, timeout_s: float = 120.0) -> subprocess.CompletedProcess[str]:
    environment = {**os.environ, "PYTHONPATH": str(PACKAGE.parent)}
    command = [sys.executable, "-c", code, *arguments]
    return subprocess.run(command, capture_output=True, text=True, timeout=timeout_s, env=environment, check=False)
