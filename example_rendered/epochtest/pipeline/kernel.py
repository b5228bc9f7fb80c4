"""A kernel of the study's own interpreter, whatever kernels are installed elsewhere.

A kernelspec found on ``JUPYTER_PATH`` or in a home folder could start another environment's
Python; this manager never looks for one. Sockets are files on POSIX systems, because parallel
kernels race for TCP ports.
"""

from __future__ import annotations

import os
import shutil
import sys
import tempfile
from pathlib import Path
from typing import Any

from jupyter_client.kernelspec import KernelSpec
from jupyter_client.manager import AsyncKernelManager

KERNEL_METADATA = {"display_name": "Python 3", "language": "python", "name": "python3"}


def clean_environment(library_parent: Path, ipython_folder: Path) -> dict[str, str]:
    """Variables that keep foreign packages, start-up files and thread counts out of a kernel."""
    return {
        "PYTHONPATH": str(library_parent),
        "PYTHONNOUSERSITE": "1",
        "PYTHONHASHSEED": "0",
        "PYTHONDONTWRITEBYTECODE": "1",
        "IPYTHONDIR": str(ipython_folder),
        "OMP_NUM_THREADS": "1",
        "OPENBLAS_NUM_THREADS": "1",
    }


class OwnInterpreterManager(AsyncKernelManager):  # type: ignore[misc]
    """Starts ``sys.executable`` and gives each kernel a socket folder of its own."""

    def __init__(self, **arguments: Any) -> None:
        super().__init__(**arguments)
        self._sockets: str | None = None
        if os.name == "posix":
            self._sockets = tempfile.mkdtemp(prefix="epochtest-")
            self.transport = "ipc"
            self.ip = os.path.join(self._sockets, "k")

    @property
    def kernel_spec(self) -> KernelSpec:
        """The one kernel there is: this interpreter."""
        return KernelSpec(
            argv=[
                sys.executable,
                "-m",
                "ipykernel_launcher",
                "-f",
                "{connection_file}",
                "--log-level=40",
                "--HistoryManager.enabled=False",
            ],
            **{k: v for k, v in KERNEL_METADATA.items() if k != "name"},
        )

    async def cleanup_resources(self, restart: bool = False) -> None:
        """Remove the socket folder with the other resources of a kernel that has ended."""
        await super().cleanup_resources(restart)
        if self._sockets is not None and not restart:
            shutil.rmtree(self._sockets, ignore_errors=True)
