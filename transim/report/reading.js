const strip = document.getElementById("reading");
const at = cb_obj.x;
if (strip && Number.isFinite(at)) {
  const number = (value) => (value === 0 ? "0" : Math.abs(value) >= 1e-3 && Math.abs(value) < 1e5
    ? String(Number(value.toPrecision(5))) : value.toExponential(3));
  const [unit, time] = panel.tags;
  const words = [["what", `${number(at)} ${time}`]];
  for (const renderer of panel.renderers) {
    if (renderer.tags[0] !== "trace" || !renderer.visible) continue;
    const x = renderer.data_source.data.x, y = renderer.data_source.data.y;
    if (at < x[0] || at > x[x.length - 1]) continue;
    let low = 0, high = x.length - 1;
    while (high - low > 1) {
      const middle = (low + high) >> 1;
      if (x[middle] <= at) low = middle; else high = middle;
    }
    const share = x[high] > x[low] ? (at - x[low]) / (x[high] - x[low]) : 0;
    const value = y[low] + share * (y[high] - y[low]);
    words.push(["", `${renderer.name}: ${number(value)}${unit === "1" ? "" : ` ${unit}`}`]);
  }
  strip.replaceChildren(...words.map(([kind, text]) => {
    const word = document.createElement("span");
    word.className = kind;
    word.textContent = text;
    return word;
  }));
  strip.hidden = false;
  if (!cursor.visible) cursor.visible = true;
}
