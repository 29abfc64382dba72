"""What a fresh interpreter loads: contracts on imports hold at run time too, where imports are deferred."""

from __future__ import annotations

import pkgutil
import subprocess
import sys

import pytest

import gnssmon


def _loaded_after(code: str) -> set[str]:
    done = subprocess.run(
        [sys.executable, "-c", f"{code}\nimport sys; print('\\n'.join(sys.modules))"],
        capture_output=True,
        text=True,
        check=True,
    )
    return set(done.stdout.split())


CORE = ("monitor", "snapshot", "pipeline", "epochs", "nmea", "statistics", "acceptance.criteria", "diagnosis", "alarms")


@pytest.mark.parametrize("module", CORE)
def test_core_loads_no_screen_and_no_port(module):
    """The core can be imported where there is neither a terminal library nor a serial port."""
    loaded = _loaded_after(f"import gnssmon.{module}")

    assert not loaded & {"textual", "rich", "serial", "matplotlib", "jinja2"}


def test_check_command_loads_no_screen():
    """A headless run does not pay for the dashboard, nor for figures that nobody asked for."""
    loaded = _loaded_after("import gnssmon.commands.check")

    assert not loaded & {"textual", "matplotlib", "scipy.stats"}


def test_every_module_can_be_imported_first():
    """No module needs another one to have been imported before it."""
    names = [m.name for m in pkgutil.walk_packages(gnssmon.__path__, "gnssmon.") if not m.name.endswith("__main__")]
    assert len(names) > 50
    failures = []
    # One fresh interpreter; the modules of ours are forgotten between imports.
    code = (
        "import importlib, sys\n"
        f"for name in {names!r}:\n"
        "    for known in [k for k in sys.modules if k.split('.')[0] == 'gnssmon']:\n"
        "        del sys.modules[known]\n"
        "    try:\n"
        "        importlib.import_module(name)\n"
        "    except Exception as error:\n"
        "        print(name, repr(error))\n"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    failures += done.stdout.splitlines()

    assert failures == []
