"""The one place that knows how kernels are compiled and where their machine code is kept.

numba trusts the time stamp of the file that a function stands in. A kernel that calls another module's kernel
would so be served stale after an edit of the other. The cache folder therefore carries a hash of every module
that can hold a kernel: an edit anywhere gives a new folder.
"""

import hashlib
import os
import tempfile
from pathlib import Path
from typing import Any

import numba
import platformdirs
from numba.extending import intrinsic

_PACKAGE = Path(__file__).resolve().parent.parent
_ROOMS = ("elements", "solver", "tracing")


def _cache_folder() -> Path:
    """Folder of the compiled kernels: user cache / version of the sources, or a temporary one."""
    digest = hashlib.sha256(numba.__version__.encode())
    for room in _ROOMS:
        for source in sorted((_PACKAGE / room).glob("*.py")):
            digest.update(source.read_bytes())
    name = digest.hexdigest()[:16]
    for root in (platformdirs.user_cache_path("wellshed"), Path(tempfile.gettempdir()) / "wellshed"):
        folder = root / "kernels" / name
        try:
            folder.mkdir(parents=True, exist_ok=True)
        except OSError:
            continue
        if os.access(folder, os.W_OK):
            return folder
    return Path(tempfile.mkdtemp(prefix="wellshed-"))


if "NUMBA_CACHE_DIR" not in os.environ:
    numba.config.CACHE_DIR = str(_cache_folder())  # type: ignore[attr-defined]


def in_cache(name: str) -> bool:
    """Whether machine code of a kernel or driver of this name is kept from an earlier run."""
    return any(Path(numba.config.CACHE_DIR).rglob(f"*.{name}-*.nbi"))  # type: ignore[attr-defined]


# Division by zero gives inf instead of a hidden branch (which would stop vectorisation). Of fastmath only the fusing
# of a product with a sum: the series and recurrences are chains of them. NaN stays NaN, zero keeps its sign.
_FLAGS: dict[str, Any] = {"cache": True, "error_model": "numpy", "fastmath": {"contract"}}
kernel = numba.njit(**_FLAGS)
driver = numba.njit(nogil=True, **_FLAGS)  # a loop over points, called from Python: see ``blocks``
inlined = numba.njit(inline="always", **_FLAGS)


def _unowned(typing_context: Any, array: Any) -> Any:
    """The same array without its count of references, for a kernel whose caller holds it.

    Every use of an owned array inside a loop costs two locked operations of the processor.
    """

    def code(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        out = context.make_array(signature.args[0])(context, builder, arguments[0])
        out.meminfo = out.meminfo.type(None)  # null pointers
        out.parent = out.parent.type(None)
        return out._getvalue()

    return array(array), code


unowned: Any = intrinsic(_unowned)
