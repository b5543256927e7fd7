"""What importing costs: nothing heavy is loaded before it is needed. Ratios of time are in tests/benchmarks."""

import subprocess
import sys

HEAVY = ("jax", "scipy", "matplotlib", "lark", "numpy", "nbformat", "IPython")


def modules_after(statement: str) -> set[str]:
    code = f"{statement}\nimport sys\nprint('\\n'.join(sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60)
    return set(done.stdout.split())


def test_importing_the_package_loads_nothing_heavy() -> None:
    loaded = modules_after("import quarterturn")
    assert "quarterturn" in loaded
    assert not loaded & set(HEAVY)


def test_the_public_calls_are_there() -> None:
    import quarterturn as qt

    assert set(qt.__all__) <= set(dir(qt))
    assert all(callable(call) for call in (qt.action, qt.sample, qt.levels, qt.saddle, qt.verify))
