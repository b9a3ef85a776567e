"""What every test needs before Qt, VTK, matplotlib or numba is imported."""

import os
import sys

from hypothesis import settings

from app.kernel_cache import choose_kernel_cache

os.environ.setdefault("QT_QPA_PLATFORM", "offscreen")
os.environ.setdefault("MPLBACKEND", "Agg")
if sys.platform == "linux":
    os.environ.setdefault("VTK_DEFAULT_OPENGL_WINDOW", "vtkEGLRenderWindow")
choose_kernel_cache()

# No deadline: the first example may compile a kernel.
settings.register_profile("here", deadline=None, max_examples=40)
settings.register_profile("ci", parent=settings.get_profile("here"), derandomize=True, print_blob=True)
settings.load_profile("ci" if os.environ.get("CI") else "here")
