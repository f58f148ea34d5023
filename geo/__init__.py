"""Ground that can be reached: frames, terrain, wind, solvers, outlines, sections.

Compiled kernels are cached in a folder named by a hash of every kernel source, because numba
looks only at a kernel's own file: after an update it would go on using an old callee.
"""

import hashlib
import tempfile
from pathlib import Path

import numba


def _kernel_cache() -> str:
    """Return the folder of the compiled kernels, beside the package or in the temporary folder."""
    here = Path(__file__).parent
    digest = hashlib.sha256()
    for source in sorted(here.glob("*.py")):
        text = source.read_bytes()
        if b"@njit" in text:
            digest.update(text)
    folder = here / "__pycache__" / f"kernels-{digest.hexdigest()[:16]}"
    try:
        folder.mkdir(parents=True, exist_ok=True)
    except OSError:
        return str(Path(tempfile.gettempdir()) / f"engineout-{folder.name}")
    return str(folder)


if not getattr(numba.config, "CACHE_DIR", ""):
    setattr(numba.config, "CACHE_DIR", _kernel_cache())  # noqa: B010 - numba's stubs lack it
