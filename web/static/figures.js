// Draws the figures of a page in the colours of the stylesheet, and again when the colours change.

const COLOUR = /^var\((--[a-z-]+)\)$/;
const COLOUR_KEY = /color$/i;

function isPlain(value) {
  return value !== null && typeof value === "object" && !Array.isArray(value);
}

// Colours are given by the name of a custom property, and only where a colour is meant:
// a name that somebody typed is never taken for one.
function coloured(value, styles, key = "") {
  if (typeof value === "string" && COLOUR_KEY.test(key)) {
    const named = COLOUR.exec(value);
    return named ? styles.getPropertyValue(named[1]).trim() : value;
  }
  if (Array.isArray(value)) return value.map((entry) => coloured(entry, styles, key));
  if (isPlain(value)) {
    return Object.fromEntries(Object.entries(value).map(([name, entry]) => [name, coloured(entry, styles, name)]));
  }
  return value;
}

function merged(base, own) {
  const result = { ...base };
  for (const [key, value] of Object.entries(own)) {
    result[key] = isPlain(value) && isPlain(result[key]) ? merged(result[key], value) : value;
  }
  return result;
}

const AXIS = {
  color: "var(--ink)",
  gridcolor: "var(--thread)",
  linecolor: "var(--edge)",
  zerolinecolor: "var(--edge)",
  tickcolor: "var(--edge)",
  automargin: true,
};

function ownLook(layout, styles) {
  const look = {
    autosize: true,
    paper_bgcolor: "rgba(0,0,0,0)",
    plot_bgcolor: "rgba(0,0,0,0)",
    font: { family: styles.getPropertyValue("--sans").trim(), size: 14, color: "var(--ink)" },
    hoverlabel: { bgcolor: "var(--linen-light)", bordercolor: "var(--edge)", font: { color: "var(--ink)" } },
    legend: { orientation: "h", yanchor: "bottom", y: 1.02, x: 0 },
    margin: { l: 16, r: 16, t: 24, b: 24 },
    dragmode: false,
    xaxis: AXIS,
    yaxis: AXIS,
  };
  for (const key of Object.keys(layout)) {
    if (/^[xy]axis\d+$/.test(key)) look[key] = AXIS;
  }
  return merged(look, layout);
}

function draw(place) {
  const content = JSON.parse(document.getElementById(place.dataset.chart).textContent);
  const styles = getComputedStyle(document.documentElement);
  const layout = coloured(ownLook(content.layout, styles), styles);
  // The library forgets the height of its place when the window changes, and the page would close up over the figure.
  place.style.minHeight = `${layout.height}px`;
  return window.Plotly.react(place, coloured(content.data, styles), layout, {
    responsive: true,
    displayModeBar: false,
    scrollZoom: false,
    doubleClick: false,
  });
}

function drawAll() {
  return Promise.all([...document.querySelectorAll("[data-chart]")].map(draw));
}

function onPaper(printing) {
  document.documentElement.toggleAttribute("data-paper", printing);
  drawAll();
}

drawAll().then(() => document.documentElement.setAttribute("data-figures", "drawn"));
matchMedia("(prefers-color-scheme: dark)").addEventListener("change", drawAll);
matchMedia("print").addEventListener("change", (event) => onPaper(event.matches));
window.addEventListener("beforeprint", () => onPaper(true));
window.addEventListener("afterprint", () => onPaper(false));
