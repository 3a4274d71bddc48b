(() => {
  "use strict";
  const section = document.getElementById("waveforms");
  const models = () => (window.Bokeh && Bokeh.documents.length ? Bokeh.documents[0] : null);
  const traces = () => models().roots().flatMap((plot) => plot.renderers);

  function look(view) {
    const page = models();
    if (!page) return;
    const range = page.get_model_by_name("time");
    const [first, last] = range.bounds;
    const width = range.end - range.start, middle = (range.start + range.end) / 2;
    let start = range.start, end = range.end;
    if (view === "all") [start, end] = [first, last];
    else if (view === "in") [start, end] = [middle - width / 4, middle + width / 4];
    else if (view === "out") [start, end] = [middle - width, middle + width];
    else if (view === "left" || view === "right") {
      const step = Math.min(width / 2, view === "left" ? start - first : last - end) * (view === "left" ? -1 : 1);
      [start, end] = [start + step, end + step];
    } else {
      const on = Number(section.dataset.on), off = Number(section.dataset.off);
      const [begin, other] = view === "on" ? [on, off] : [off, on];
      const stop = other > begin ? other : last;
      start = begin - 0.05 * (stop - begin);
      end = begin + 0.5 * (stop - begin);
    }
    range.setv({start: Math.max(first, start), end: Math.min(last, end)});
  }

  for (const button of section.querySelectorAll("button[data-view]")) {
    button.addEventListener("click", () => look(button.dataset.view));
  }
  for (const box of section.querySelectorAll("input[data-place]")) {
    box.addEventListener("change", () => {
      for (const trace of traces()) {
        if (trace.tags[1] === Number(box.dataset.place)) trace.visible = box.checked;
      }
    });
  }
  // a finger that strokes over a panel scrolls the page; the buttons zoom
  if (window.matchMedia("(pointer: coarse)").matches) {
    const wait = () => {
      if (!models() || !models().roots().length) return void setTimeout(wait, 100);
      for (const plot of models().roots()) plot.toolbar.active_drag = null;
    };
    wait();
  }
})();
