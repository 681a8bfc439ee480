/* What the page does: draw a sample when it is opened, sort and find in the table, copy, print. */
(() => {
  "use strict";
  const data = JSON.parse(document.getElementById("data").textContent);
  const all = (selector, root = document) => [...root.querySelectorAll(selector)];
  const dark = matchMedia("(prefers-color-scheme: dark)");
  const named = name => getComputedStyle(document.documentElement).getPropertyValue(name).trim();

  /* ---- curves out of their packing (the other side of curves.py) ---- */
  const bytes = text => Uint8Array.from(atob(text), char => char.charCodeAt(0)).buffer;
  const unpack = packed => {
    if (Array.isArray(packed)) return packed; // times and names
    if (packed.f !== undefined) return Array.from(new Float32Array(bytes(packed.f)));
    return Array.from(new Uint16Array(bytes(packed.q)), code => code === 65535 ? NaN : packed.low + packed.step * code);
  };
  const spread = (packed, axis) => {
    const values = unpack(packed);
    if (!packed.at) return values;
    const out = new Array(axis.length);
    for (let k = 0; k + 1 < packed.at.length; k++) {
      const [from, to] = [packed.at[k], packed.at[k + 1]];
      for (let i = from; i <= to; i++) {
        const part = (axis[i] - axis[from]) / (axis[to] - axis[from]);
        out[i] = values[k] + part * (values[k + 1] - values[k]);
      }
    }
    return out;
  };
  const ready = result => {
    if (!result.x) {
      result.x = unpack(result.axis);
      result.signals = (result.pure || []).map(unpack);
    }
    return result;
  };
  const curvesOf = (place, key) => {
    const result = ready(data.results[place]);
    const kept = data.samples[key];
    const residual = unpack(kept.residual);
    const baseline = spread(kept.baseline, result.x);
    const contributions = result.signals.map((signal, j) =>
      signal.map(value => kept.amounts[j] === null ? NaN : kept.amounts[j] * value));
    const inside = residual.map(Number.isFinite);
    const fitted = kept.fitted ? unpack(kept.fitted) : inside.map((used, i) =>
      used || !kept.gaps ? contributions.reduce((sum, curve) => sum + (Number.isFinite(curve[i]) ? curve[i] : 0), baseline[i]) : NaN);
    const left = unpack(kept.outside);
    let next = 0;
    const outside = inside.map(used => used ? NaN : left[next++]);
    const measured = inside.map((used, i) => used ? fitted[i] + residual[i] : NaN);
    return { x: result.x, measured, outside, fitted, baseline, residual, contributions };
  };

  /* ---- figures ---- */
  const config = {
    displaylogo: false, responsive: true,
    modeBarButtons: [["toImage", "zoom2d", "pan2d", "zoomIn2d", "zoomOut2d", "resetScale2d"]],
    toImageButtonOptions: { scale: 2 },
  };
  const gaps = values => values.map(value => Number.isFinite(value) ? value : null);
  const broken = (values, breaks, fill) => {
    if (!breaks.length) return values;
    const out = [];
    values.forEach((value, i) => { if (breaks.includes(i)) out.push(fill(i)); out.push(value); });
    return out;
  };
  const INK = "#3b4654", PALE = "#9fb4c7"; // as in plots.py
  const themed = (figure, width, light) => {
    const ink = light ? "#1b2430" : named("--ink");
    const narrow = width < 640;
    const layout = Object.assign({}, figure.layout, {
      paper_bgcolor: "rgba(0,0,0,0)", plot_bgcolor: "rgba(0,0,0,0)", width,
      font: { color: ink, size: narrow ? 10 : 12, family: "system-ui, Segoe UI, Roboto, Arial, sans-serif" },
      hoverlabel: { bgcolor: light ? "#ffffff" : named("--soft"), font: { color: ink } },
    });
    layout.xaxis = Object.assign({}, layout.xaxis);
    if (light) layout.height = Math.min(layout.height, 610); // with its table on one page of A4
    const traces = figure.data.map(trace => {
      const copy = Object.assign({}, trace, { line: Object.assign({}, trace.line) });
      if (copy.line.color === INK) copy.line.color = ink;
      if (copy.line.color === PALE && !light) copy.line.color = named("--pale");
      if (narrow) delete copy.legend;
      return copy;
    });
    if (narrow) layout.legend = { orientation: "h", y: -0.12 };
    return [traces, layout];
  };
  const figureOf = plot => {
    if (plot.dataset.figure !== undefined) {
      const kept = data.figures[plot.dataset.figure];
      const data2 = kept.data.map(trace => Object.assign({}, trace, { x: unpack(trace.x), y: gaps(unpack(trace.y)) }));
      return { data: data2, layout: kept.layout };
    }
    const place = plot.dataset.result;
    const key = `${place}-${plot.dataset.sample}`;
    const curves = curvesOf(place, key);
    const { figure: pattern, breaks } = data.results[place];
    const x = broken(curves.x, breaks, i => curves.x[i]);
    const traces = pattern.data.map(trace => {
      const meta = trace.meta;
      const y = meta.curve === "contribution" ? curves.contributions[meta.component] : curves[meta.curve];
      return Object.assign({}, trace, { x, y: broken(gaps(y || []), breaks, () => null) });
    }).filter(trace => trace.y.some(value => value !== null));
    const layout = Object.assign({}, pattern.layout, { shapes: data.samples[key].shapes });
    layout.xaxis = Object.assign({}, layout.xaxis, { unifiedhovertitle: { text: `%{x:.6~g} ${data.results[place].unit}` } });
    return { data: traces, layout };
  };
  const draw = (plot, light = false) => {
    const width = light ? 650 : plot.clientWidth || plot.parentElement.clientWidth;
    if (!plot.kept) plot.kept = figureOf(plot);
    const [traces, layout] = themed(plot.kept, width, light);
    Plotly.react(plot, traces, layout, config);
    plot.classList.add("drawn");
  };
  const hidden = plot => { const sample = plot.closest("details.sample"); return sample && !sample.open; };
  all("details.sample").forEach(details => details.addEventListener("toggle", () => {
    if (details.open) all(".plot:not(.drawn)", details).forEach(plot => draw(plot));
  }));
  const redraw = light => all(".plot").forEach(plot => {
    // A closed sample is drawn anew when it is opened
    if (hidden(plot)) plot.classList.remove("drawn"); else draw(plot, light);
  });
  dark.addEventListener("change", () => redraw(false));
  let waiting = 0;
  addEventListener("resize", () => { clearTimeout(waiting); waiting = setTimeout(() => redraw(false), 150); });
  addEventListener("beforeprint", () => {
    document.documentElement.classList.add("printing");
    const samples = all("details.sample");
    const open = samples.filter(sample => sample.open).length;
    const note = document.getElementById("printed");
    if (note) note.textContent = open < samples.length ? `${open} of ${samples.length} samples were open and are printed.` : "";
    all("details.files").forEach(files => { files.open = true; });
    redraw(true);
  });
  addEventListener("afterprint", () => { document.documentElement.classList.remove("printing"); redraw(false); });

  /* ---- moving about ---- */
  const follow = () => {
    const target = location.hash.length > 1 ? document.getElementById(decodeURIComponent(location.hash.slice(1))) : null;
    if (target && target.matches("details")) { target.open = true; target.scrollIntoView(); }
  };
  addEventListener("hashchange", follow);
  const press = (id, act) => { const found = document.getElementById(id); if (found) found.addEventListener("click", act); };
  press("open-all", () => all("details.sample").forEach(details => { details.open = true; }));
  press("close-all", () => all("details.sample").forEach(details => { details.open = false; }));

  /* ---- the table of all samples ---- */
  const table = document.getElementById("all");
  if (table) {
    const body = table.tBodies[0];
    all("thead th", table).forEach((head, column) => head.querySelector("button").addEventListener("click", () => {
      const down = head.getAttribute("aria-sort") === "ascending";
      all("thead th", table).forEach(other => other.removeAttribute("aria-sort"));
      head.setAttribute("aria-sort", down ? "descending" : "ascending");
      const number = head.dataset.kind === "number" || column === 0;
      const value = row => {
        const cell = row.cells[column];
        if (!number) return cell.textContent.trim();
        return cell.dataset.v === undefined ? -Infinity : Number(cell.dataset.v);
      };
      const compare = (one, other) => number ? value(one) - value(other)
        : value(one).localeCompare(value(other), "en", { numeric: true });
      [...body.rows].sort((one, other) => down ? compare(other, one) : compare(one, other)).forEach(row => body.append(row));
    }));
    const find = document.getElementById("find");
    const tiles = all(".tile");
    const filter = () => {
      const text = find ? find.value.toLowerCase() : "";
      const pressed = tiles.filter(tile => tile.getAttribute("aria-pressed") === "true").map(tile => tile.dataset.verdict);
      [...body.rows].forEach(row => {
        row.hidden = !(row.dataset.find.toLowerCase().includes(text) && (!pressed.length || pressed.includes(row.dataset.verdict)));
      });
    };
    if (find) find.addEventListener("input", filter);
    tiles.forEach(tile => tile.addEventListener("click", () => {
      tile.setAttribute("aria-pressed", tile.getAttribute("aria-pressed") === "true" ? "false" : "true");
      filter();
    }));
    const said = document.getElementById("copied");
    press("copy-overview", () => {
      const rows = [...body.rows].filter(row => !row.hidden);
      const lines = [table.tHead.rows[0], ...rows].map(row => [...row.cells].map(cell => cellText(cell.innerText)));
      copy(lines, () => { said.textContent = `${rows.length} rows copied.`; });
    });
  }

  /* ---- copying, so that no cell runs as a formula in a spreadsheet ---- */
  const cellText = text => {
    const line = String(text).replace(/\s+/g, " ").trim();
    return /^'*\s*[=+\-@\uff1d\uff0b\uff0d\uff20]/.test(line) && !/^[-+]?(\d+\.?\d*|\.\d+)(e[-+]?\d+)?$/i.test(line) ? `'${line}` : line;
  };
  const copy = (rows, done) => {
    const text = rows.map(row => row.join("\t")).join("\n");
    const fallback = () => {
      const area = document.createElement("textarea");
      area.value = text;
      document.body.append(area);
      area.select();
      document.execCommand("copy");
      area.remove();
      done();
    };
    if (navigator.clipboard) navigator.clipboard.writeText(text).then(done, fallback); else fallback();
  };
  all(".copy-curves").forEach(button => button.addEventListener("click", () => {
    const plot = button.closest("figure").querySelector(".plot");
    const place = plot.dataset.result;
    const curves = curvesOf(place, `${place}-${plot.dataset.sample}`);
    const names = data.results[place].figure.data.filter(trace => trace.meta.curve === "contribution").map(trace => trace.name);
    const columns = [curves.measured.map((value, i) => Number.isFinite(value) ? value : curves.outside[i]), curves.fitted,
      curves.residual, curves.baseline, ...curves.contributions];
    const head = [data.results[place].title, "measured", "fitted", "residual", "baseline", ...names];
    const rows = curves.x.map((x, i) => [x, ...columns.map(column => Number.isFinite(column[i]) ? Number(column[i].toPrecision(6)) : "")]);
    const label = button.textContent;
    copy([head.map(cellText), ...rows], () => {
      button.textContent = "Copied";
      setTimeout(() => { button.textContent = label; }, 1500);
    });
  }));

  redraw(false);
  follow();
})();
