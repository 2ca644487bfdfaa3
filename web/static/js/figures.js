/**
 * Brings the figures to life: zoom, values under the pointer, lines to switch off.
 *
 * Expects `<figure data-figure data-plotly="address"><div class="plot"><svg class="plot-still">…</svg>
 * <div class="plot-living" hidden></div></div>…<script type="application/json">…</script></figure>`.  Without script, and
 * on paper, the still picture stays.  The plotting script is large, so it is loaded when the first figure comes near.
 */

const BUTTONS = ["zoom2d", "pan2d", "zoomIn2d", "zoomOut2d", "resetScale2d", "toImage"];

/** Settings of the plotting script: its button bar holds only what works offline. */
export const CONFIG = {
  displaylogo: false,
  responsive: true,
  scrollZoom: false,
  doubleClick: "reset",
  showSendToCloud: false,
  showEditInChartStudio: false,
  modeBarButtons: [BUTTONS],
};

/** The data of a specification with real colours; `colour` turns `--line-1` into what it stands for. */
export function painted(data, colour) {
  return data.map((trace) => ({
    ...trace,
    line: { ...trace.line, color: colour(trace.line.color) },
    ...(trace.fillcolor ? { fillcolor: colour(trace.fillcolor) } : {}),
  }));
}

/** The layout of a specification on the paper that the reader has chosen. */
export function dressed(layout, colour, { font, coarse }) {
  const axis = (given) => ({
    ...given,
    gridcolor: colour("--grid"),
    linecolor: colour("--edge"),
    showline: true,
    ticks: "",
    automargin: true,
    title: { ...given.title, font: { size: 13, color: colour("--ink") }, standoff: 8 },
    tickfont: { size: 12, color: colour("--faint") },
  });
  return {
    ...layout,
    xaxis: axis(layout.xaxis),
    yaxis: axis(layout.yaxis),
    shapes: (layout.shapes ?? []).map((shape) => ({
      ...shape,
      line: { ...shape.line, color: colour("--faint") },
      ...(shape.fillcolor ? { fillcolor: colour(shape.fillcolor) } : {}),
    })),
    paper_bgcolor: "rgba(0,0,0,0)",
    plot_bgcolor: "rgba(0,0,0,0)",
    font: { family: font, color: colour("--ink") },
    margin: { l: 56, r: 14, t: 30, b: 44 },
    legend: { orientation: "h", x: 0, y: 1, yanchor: "bottom", font: { size: 12 } },
    modebar: { bgcolor: "rgba(0,0,0,0)", color: colour("--faint"), activecolor: colour("--act"), orientation: "h" },
    hoverlabel: { bgcolor: colour("--sheet"), bordercolor: colour("--edge"), font: { color: colour("--ink"), family: font } },
    // A finger that scrolls the page must not be caught by a plot as wide as the screen.
    dragmode: coarse ? false : "zoom",
  };
}

/** Load a classic script once; resolves with the global it makes. */
function loaded(address) {
  loaded.promise ??= new Promise((resolve, reject) => {
    const script = document.createElement("script");
    script.src = address;
    script.onload = () => resolve(globalThis.Plotly);
    script.onerror = () => reject(new Error(`cannot load ${address}`));
    document.head.append(script);
  });
  return loaded.promise;
}

function paper() {
  const style = getComputedStyle(document.documentElement);
  const colour = (name) => resolved(style.getPropertyValue(name).trim());
  return { colour, font: getComputedStyle(document.body).getPropertyValue("--plain").trim(), coarse: matchMedia("(pointer: coarse)").matches };
}

/** What a colour text such as `light-dark(…)` comes to: the browser works it out on a probe. */
function resolved(text) {
  const probe = document.createElement("span");
  probe.style.color = text;
  probe.hidden = true;
  document.body.append(probe);
  const { color } = getComputedStyle(probe);
  probe.remove();
  return color;
}

async function draw(figure) {
  const spec = JSON.parse(figure.querySelector('script[type="application/json"]').textContent);
  const living = figure.querySelector(".plot-living");
  const plotly = await loaded(figure.dataset.plotly);
  const { colour, ...rest } = paper();
  living.hidden = false;
  await plotly.react(living, painted(spec.data, colour), dressed(spec.layout, colour, rest), CONFIG);
  figure.dataset.living = "";
}

/** Draw every figure below `root` when it comes near the window, and again when the paper changes. */
export function enhance(root) {
  const figures = [...root.querySelectorAll("figure[data-plotly]")];
  const attempt = (figure) => draw(figure).catch(() => { figure.querySelector(".plot-living").hidden = true; });
  const watcher = new IntersectionObserver((entries) => {
    for (const { isIntersecting, target } of entries) {
      if (!isIntersecting) continue;
      watcher.unobserve(target);
      attempt(target);
    }
  }, { rootMargin: "200px" });
  for (const figure of figures) watcher.observe(figure);
  const again = () => figures.filter((figure) => "living" in figure.dataset).forEach(attempt);
  document.addEventListener("schemechange", again);
  matchMedia("(prefers-color-scheme: dark)").addEventListener("change", again);
}

if (typeof document !== "undefined") enhance(document);
