"""The web process stays light: it loads neither solver nor mesher nor renderer."""

import subprocess
import sys

HEAVY = ("scipy", "vtk", "vtkmodules", "pyvista", "netgen", "pymetis")


def test_the_api_imports_no_numerical_or_rendering_stack() -> None:
    """In a fresh interpreter, because this one may have loaded anything."""
    program = f"import sys, api.app; print([m for m in {HEAVY} if m in sys.modules])"
    done = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True, timeout=60
    )
    assert done.stdout.strip() == "[]"
