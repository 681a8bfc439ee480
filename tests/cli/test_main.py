import subprocess
import sys
import time

import pytest

from unmix.cli import COMMANDS

HEAVY = ("numpy", "xarray", "pandas", "scipy", "sklearn", "numba", "plotly", "rich")


def python(code):
    return subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=False, timeout=60
    )


def test_help_lists_every_command_and_fits_eighty_columns(unmix):
    status, out, _ = unmix("--help")
    assert status == 0
    for name in COMMANDS:
        assert f"\n  {name} " in out
    assert max(map(len, out.splitlines())) <= 80


def test_help_loads_nothing_heavy():
    code = (
        "import sys\nfrom unmix.cli import main\n"
        "try: main(['--help'])\nexcept SystemExit: pass\n"
        f"print('LOADED', [m for m in {HEAVY} if m in sys.modules], "
        "[m for m in sys.modules if m.startswith('unmix.cli.')])"
    )
    assert python(code).stdout.strip().splitlines()[-1] == "LOADED [] []"


@pytest.mark.parametrize("command", ["quantify", "conditioning", "demo"])
def test_help_of_a_command_loads_nothing_heavy_and_has_an_example(command):
    code = (
        "import sys\nfrom unmix.cli import main\n"
        f"try: main(['{command}', '--help'])\nexcept SystemExit: pass\n"
        f"print('LOADED', [m for m in {HEAVY} if m in sys.modules])"
    )
    lines = python(code).stdout.strip().splitlines()
    assert lines[-1] == "LOADED []"
    assert any(line.startswith(f"    unmix {command}") for line in lines)


@pytest.mark.benchmark
def test_help_takes_less_than_four_tenths_of_a_second():
    python("import typer")
    start = time.perf_counter()
    python("from unmix.cli import main; main(['--help'])")
    assert time.perf_counter() - start < 0.4


def test_version_and_environment(unmix):
    status, out, _ = unmix("--version")
    assert status == 0
    assert out.startswith("unmix ")
    status, out, _ = unmix("--environment")
    assert status == 0
    told = dict(line.split(maxsplit=1) for line in out.splitlines())
    assert set(told) >= {"python", "unmix", "numpy", "scipy", "plotly", "system"}


def test_an_unknown_command_is_refused_with_the_nearest(unmix):
    status, _, err = unmix("quantfy")
    assert status == 2
    assert "there is no command 'quantfy'; did you mean 'quantify'?" in err
    assert "Traceback" not in err


def test_no_argument_shows_the_help(unmix):
    _, out, err = unmix()
    assert "Commands:" in out + err


def test_the_installed_command_starts():
    done = subprocess.run([sys.executable, "-c", "from unmix.cli import main; main()", "--version"],
                          capture_output=True, text=True, check=False, timeout=60)  # fmt: skip
    assert done.returncode == 0
    assert done.stdout.startswith("unmix ")


def test_the_package_runs_as_a_module():
    run = subprocess.run([sys.executable, "-m", "unmix", "--version"], capture_output=True, text=True, check=True)
    assert run.stdout.startswith("unmix ")
