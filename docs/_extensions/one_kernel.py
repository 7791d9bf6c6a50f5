"""All pages in one kernel, emptied before each: imports and compiling are paid for once.

A page still sees only the names it made itself, in an empty folder of its own. Left out of ``extensions`` in conf.py,
each page starts a kernel of its own, and the build takes about twice as long.
"""

from typing import Any

from myst_nb.core.execute import inline
from nbclient.util import run_sync
from sphinx.application import Sphinx

EMPTY = """
%reset -f
import os as _os, tempfile as _tempfile
_os.chdir(_tempfile.mkdtemp())
"""


class OneKernelClient(inline.ModifiedNotebookClient):  # type: ignore[misc]
    """A notebook client that uses the kernel of the client before it."""

    kernel: Any = None

    def __init__(self, notebook: Any, **options: Any) -> None:
        super().__init__(notebook, **options)
        if OneKernelClient.kernel is None:
            self.create_kernel_manager()
            self.start_new_kernel()
            self.start_new_kernel_client()
            OneKernelClient.kernel = (self.km, self.kc)
        self.km, self.kc = OneKernelClient.kernel
        self.owns_km = False
        run_sync(self._empty)()

    async def _empty(self) -> None:
        reply = await self.kc.execute_interactive(EMPTY, store_history=False, output_hook=lambda message: None)
        if reply["content"]["status"] != "ok":
            raise RuntimeError(f"the kernel could not be emptied: {reply['content']}")


def setup(app: Sphinx) -> dict[str, bool]:
    """Take the place of the client that starts a kernel for each page."""
    inline.ModifiedNotebookClient = OneKernelClient
    app.connect("build-finished", _stop)
    return {"parallel_read_safe": False, "parallel_write_safe": True}


def _stop(app: Sphinx, exception: Exception | None) -> None:
    if OneKernelClient.kernel is not None:
        manager, client = OneKernelClient.kernel
        client.stop_channels()
        run_sync(manager.shutdown_kernel)(now=True)
        OneKernelClient.kernel = None
