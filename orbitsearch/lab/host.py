"""A Bokeh layout in a cell of JupyterLab, in step with its Python models, without the network.

Python holds the document.  A view on a page asks for it when it appears and gets it as it is then,
so a page that is loaded again shows the present state, whether or not the notebook was saved; the
notebook itself carries neither data nor BokehJS.  After that, both sides send each other patches in
the form in which Bokeh's own server sends them.

=========== ============ ==================================================================
message     to           meaning
=========== ============ ==================================================================
open        Python       a view is there; `bokeh` says that the page has no BokehJS yet
bokeh       one view     BokehJS of this Bokeh, compressed
document    one view     the whole document, arrays as binary buffers
patch       some views   what changed in Python, or in another view
patch       Python       what changed in a view: selections, ranges, taps
done        one view     its patch is worked off, it may send the next
failed      one view     a callback raised, here is the traceback
close       Python       a view is gone
=========== ============ ==================================================================
"""

import functools
import gzip
import json
import traceback
from pathlib import Path
from typing import TYPE_CHECKING, Any

import anywidget
import bokeh
import traitlets
from bokeh.core.serialization import Buffer, Serialized
from bokeh.core.types import ID
from bokeh.document import Document
from bokeh.document.json import PatchJson
from bokeh.models import LayoutDOM
from bokeh.protocol import Protocol
from bokeh.util.paths import bokehjs_path

from orbitsearch.errors import BadRequest
from orbitsearch.lab.loop import on_kernel_loop

if TYPE_CHECKING:
    from bokeh.document.events import DocumentPatchedEvent

__all__ = ["Figure"]


@functools.cache
def bokeh_source() -> bytes:
    """BokehJS with its controls, without its tables, compressed (a quarter of the size)."""
    parts = (bokehjs_path() / "js" / f"{name}.min.js" for name in ("bokeh", "bokeh-widgets"))
    # Each part is a statement of its own, and the second finds the first in the page.
    return gzip.compress(b";\n".join(part.read_bytes() for part in parts), mtime=0)


class Figure(anywidget.AnyWidget):
    """Widget that shows a Bokeh layout and keeps it in step with its Python models.

    Assign to the models as usual: each change goes to every view at once.  Prefer whole new `data`
    dictionaries; within a cell that runs, changes show while it runs.  What a user does on the
    page calls the models' `on_change` and `on_event` callbacks, on the kernel's loop.

    Several things to know of Bokeh: a model belongs to one document, so what two figures share must
    be one layout.  Tables of `bokeh.models.widgets` are not loaded.

    Parameters
    ----------
    model : LayoutDOM
        A figure, or a layout of figures.
    **kwargs
        Traits of the widget, such as `layout`.

    Attributes
    ----------
    model : LayoutDOM
        As given.
    """

    _esm = Path(__file__).parent / "host.js"
    _bokeh = traitlets.Unicode(bokeh.__version__).tag(sync=True)

    def __init__(self, model: LayoutDOM, **kwargs: Any) -> None:
        if not isinstance(model, LayoutDOM):
            raise BadRequest(f"`model` must be a Bokeh figure or layout: {model!r}")
        self.model = model
        self.document = model.document or Document()
        if not self.document.roots:
            self.document.add_root(model)
        self._views: set[str] = set()
        self._handlers = {"open": self._open, "patch": self._patch, "close": self._close}
        super().__init__(**kwargs)
        self.document.on_change_dispatch_to(self)
        self.on_msg(on_kernel_loop(self._receive))

    def close(self) -> None:
        """Remove the figure from every page."""
        # Widgets are closed again when they are collected, and when their making failed.
        if getattr(self, "document", None) is not None:
            self.document.remove_on_change(self)
        super().close()

    def _receive(self, _widget: "Figure", content: dict[str, Any], buffers: list[Any]) -> None:
        try:
            self._handlers[content["kind"]](content, buffers)
        except Exception:
            # No cell is there to show it; the console of the page is where one looks for it.
            self._say("failed", {content["view"]}, traceback.format_exc())
            raise

    def _say(
        self, kind: str, to: set[str], content: Any = None, buffers: list[Buffer] | None = None
    ) -> None:
        buffers = buffers or []
        # Arrays stay what they are: the text has references to them.
        text = json.dumps(content, default=lambda buffer: buffer.ref, allow_nan=False)
        ids = [buffer.id for buffer in buffers]
        message = {"kind": kind, "to": sorted(to), "content": text, "ids": ids}
        self.send(message, buffers=[buffer.to_bytes() for buffer in buffers])

    def _open(self, content: dict[str, Any], _buffers: list[Any]) -> None:
        view = content["view"]
        if content["bokeh"]:
            self._say("bokeh", {view}, buffers=[Buffer(ID(""), bokeh_source())])
        whole = self.document.to_json()
        self._say("document", {view}, whole.content, whole.buffers)
        self._views.add(view)

    def _close(self, content: dict[str, Any], _buffers: list[Any]) -> None:
        self._views.discard(content["view"])

    def _patch(self, content: dict[str, Any], buffers: list[Any]) -> None:
        view = content["view"]
        arrays = [Buffer(ID(str(i)), bytes(b)) for i, b in enumerate(buffers)]
        failed = None
        for event in json.loads(content["content"])["events"]:
            # Each for itself: a callback that raises must not swallow what came after.
            try:
                # The view is named as the one who set it, see below.
                patch = Serialized(PatchJson(events=[event]), arrays)
                self.document.apply_json_patch(patch, setter=view)
            except Exception as error:
                failed = failed or error
        self._say("done", {view})
        if failed is not None:
            raise failed

    @on_kernel_loop
    def _document_patched(self, event: "DocumentPatchedEvent") -> None:
        """Bokeh calls this for every change of the document, wherever it came from."""
        views = self._views - {event.setter}
        if views:
            message = Protocol().create("PATCH-DOC", [event])
            self._say("patch", views, message.content, message.buffers)
