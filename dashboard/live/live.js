// Draws one figure with Plotly.react into a node that stays, keeps the user's zoom and follows the page's colours.

const script = (address) =>
  (window.__forebreathPlot ??= new Promise((ready, failed) => {
    const tag = document.createElement("script");
    tag.src = address;
    tag.onload = () => ready(window.Plotly);
    tag.onerror = failed;
    document.head.appendChild(tag);
  }));

// "@forecast/0.2" -> "rgba(...)" of the palette in force; everything else stays as it is.
function coloured(part, palette) {
  if (Array.isArray(part)) return part.map((inner) => coloured(inner, palette));
  if (part && typeof part === "object")
    return Object.fromEntries(Object.entries(part).map(([name, inner]) => [name, coloured(inner, palette)]));
  if (typeof part !== "string" || !part.startsWith("@")) return part;
  const [name, opacity] = part.slice(1).split("/");
  if (!(name in palette)) return part;
  if (!opacity) return palette[name];
  const [r, g, b] = [1, 3, 5].map((at) => parseInt(palette[name].slice(at, at + 2), 16));
  return `rgba(${r},${g},${b},${opacity})`;
}

// What the user zoomed to, per axis, as long as the figure's uirevision stays.
function rememberZoom(node) {
  node.on("plotly_relayout", (change) => {
    for (const [name, value] of Object.entries(change)) {
      const found = name.match(/^([xy]axis)\.range(?:\[(0|1)\])?$/);
      if (!found) continue;
      const [, axis, end] = found;
      const held = (node.forebreath.zoom[axis] ??= [...node.layout[axis].range]);
      if (end === undefined) node.forebreath.zoom[axis] = [...value];
      else held[Number(end)] = value;
    }
  });
  node.on("plotly_doubleclick", () => {
    wholePicture(node);
    return false;
  });
}

function wholePicture(node) {
  node.forebreath.zoom = {};
  paint(node);
}

// One settings object per node, for its whole life: Plotly.react takes a new one for a new plot and starts over.
function settings(node) {
  return (node.forebreathSettings ??= {
    displaylogo: false,
    showSendToCloud: false,
    responsive: true,
    doubleClick: false,
    modeBarButtons: [
      ["zoom2d", "pan2d"],
      [
        {
          name: "whole",
          title: "Show the whole picture",
          icon: window.Plotly.Icons.home,
          click: () => wholePicture(node),
        },
      ],
      ["toImage"],
    ],
    toImageButtonOptions: { format: "png", scale: 2, filename: "forebreath" },
  });
}

// One painting at a time; each takes what is given last.
function paint(node) {
  const react = () => {
    const { figure, palettes, height } = node.forebreath.given;
    const palette = palettes[getComputedStyle(node).colorScheme.includes("dark") ? "dark" : "light"];
    const { data, layout } = coloured(figure, palette);
    for (const [axis, range] of Object.entries(node.forebreath.zoom)) layout[axis].range = [...range];
    return window.Plotly.react(node, data, { ...layout, height, autosize: true }, settings(node));
  };
  node.forebreathPainting = (node.forebreathPainting ?? Promise.resolve()).then(react, react);
  return node.forebreathPainting;
}

export default function ({ data, parentElement }) {
  const node = parentElement.querySelector(".fb-live");
  const figure = JSON.parse(data.figure);
  const before = node.forebreath;
  const same = before && before.given.figure.layout.uirevision === figure.layout.uirevision;
  node.forebreath = { given: { ...data, figure }, zoom: same ? before.zoom : {} };
  node.setAttribute("aria-label", data.alt);
  node.style.height = `${data.height}px`;

  let gone = false;
  script(data.script).then(async () => {
    if (gone) return;
    await paint(node);
    if (!node.dataset.listening) {
      node.dataset.listening = "yes";
      rememberZoom(node);
    }
    node.dataset.drawn = String(Number(node.dataset.drawn ?? 0) + 1);
  }, () => {
    node.textContent = "The picture could not be loaded. The table above holds the same numbers.";
  });

  // A change of scheme, by the system or by hand, shows as a new class on the app's root.
  const repaint = () => window.Plotly && node.dataset.drawn && paint(node);
  const watch = new MutationObserver(repaint);
  const root = document.querySelector(".stApp");
  if (root) watch.observe(root, { attributes: true, attributeFilter: ["class"] });
  return () => {
    gone = true;
    watch.disconnect();
  };
}
