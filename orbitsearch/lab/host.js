// A Bokeh document in a cell: the page's side of host.py, which describes the messages.

// As text through a script element: BokehJS puts itself into the page and wants to be no module.
async function loadBokeh(version, compressed) {
  const there = () => globalThis.Bokeh?.[version];
  if (!there()) {
    const stream = new Blob([compressed]).stream().pipeThrough(new DecompressionStream("gzip"));
    const script = document.createElement("script");
    script.textContent = await new Response(stream).text();
    // Another figure may have been faster.
    if (!there()) {
      document.head.append(script);
      script.remove();
    }
  }
  return there();
}

// BokehJS reads typed arrays out of buffers that begin at 0.
function bufferMap(ids, views) {
  const aligned = (v) => v.buffer.slice(v.byteOffset, v.byteOffset + v.byteLength);
  return new Map(ids.map((id, i) => [id, aligned(views[i])]));
}

// What makes an earlier event pointless once this one is there; null: every single one counts.
function keyOf(event) {
  if (event.kind === "ModelChanged") return `${event.model.id} ${event.attr}`;
  const name = event.kind === "MessageSent" ? event.msg_data?.event_name : null;
  const latest = name === "mousemove" || name === "rangesupdate";
  return latest ? `${event.msg_data.origin?.id} ${name}` : null;
}

class View {
  constructor(model, el) {
    this.model = model;
    this.el = el;
    this.name = Math.random().toString(36).slice(2);
    this.version = model.get("_bokeh");
    this.pending = [];
    this.waiting = null; // timer, while Python works on what was sent
    this.queue = Promise.resolve(); // messages are handled one after the other, in their order
    model.on("msg:custom", (message, buffers) => {
      if (!message.to.includes(this.name)) return;
      this.queue = this.queue
        .then(() => this.receive(message, buffers))
        .catch((error) => console.error("figure:", error));
    });
    this.send("open", { bokeh: !globalThis.Bokeh?.[this.version] });
  }

  send(kind, rest = {}, buffers = []) {
    this.model.send({ kind, view: this.name, ...rest }, undefined, buffers);
  }

  async receive({ kind, content, ids }, buffers) {
    if (this.gone) return;
    const value = JSON.parse(content ?? "null");
    if (kind === "bokeh") {
      await loadBokeh(this.version, buffers[0]);
    } else if (kind === "document") {
      await this.show(value, bufferMap(ids, buffers));
    } else if (kind === "patch") {
      this.document?.apply_json_patch(value, bufferMap(ids, buffers));
    } else if (kind === "done") {
      clearTimeout(this.waiting);
      this.waiting = null;
      this.flush();
    } else if (kind === "failed") {
      console.error("figure:", value);
    }
  }

  async show(content, buffers) {
    this.clear();
    this.bokeh = globalThis.Bokeh[this.version];
    const { Document } = this.bokeh.require("document/index");
    this.document = Document.from_json(content, undefined, buffers);
    this.document.on_change((event) => this.changed(event), true);
    this.views = await this.bokeh.embed.add_document_standalone(this.document, this.el);
    if (this.gone) this.clear();
  }

  // Changes that Python made arrive here too, with `sync` false: sending them back would be an echo.
  changed(event) {
    if (!event.sync) return;
    for (const one of (event.events ?? [event]).filter((e) => e.sync)) {
      const key = keyOf(one);
      if (key !== null) this.pending = this.pending.filter((e) => keyOf(e) !== key);
      this.pending.push(one);
    }
    queueMicrotask(() => this.flush());
  }

  // One message at a time: while the kernel is busy, a drag must not pile up hundreds.
  flush() {
    if (this.waiting !== null || this.pending.length === 0 || this.gone) return;
    const events = this.pending;
    this.pending = [];
    const { Buffer } = this.bokeh.require("core/serialization/index");
    const buffers = [];
    const content = JSON.stringify(this.document.create_json_patch(events), (_, value) =>
      value instanceof Buffer ? { id: `${buffers.push(value.buffer) - 1}` } : value,
    );
    // The answer can get lost with a connection; then the next change must not wait for ever.
    this.waiting = setTimeout(() => this.receive({ kind: "done" }), 10_000);
    this.send("patch", { content }, buffers);
  }

  clear() {
    this.views?.clear();
    const documents = this.bokeh?.documents ?? [];
    const at = documents.indexOf(this.document);
    if (at >= 0) documents.splice(at, 1);
    this.views = this.document = undefined;
    this.pending = [];
  }

  remove() {
    this.gone = true;
    clearTimeout(this.waiting);
    this.clear();
    try {
      this.send("close");
    } catch {
      // The kernel is gone, and with it whoever wanted to know.
    }
  }
}

export default {
  render({ model, el }) {
    const view = new View(model, el);
    return () => view.remove();
  },
};
