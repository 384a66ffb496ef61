// Builds elements. Text is always set as text, never as markup.

/** el("p", {class: "x", onclick: f}, "text", child) gives an element. */
export function el(name, attributes = {}, ...children) {
  return fill(document.createElement(name), attributes, children);
}

const svgSpace = "http://www.w3.org/2000/svg";

/** svg is el for drawings. */
export function svg(name, attributes = {}, ...children) {
  return fill(document.createElementNS(svgSpace, name), attributes, children);
}

function fill(node, attributes, children) {
  for (const [name, value] of Object.entries(attributes)) {
    if (value === undefined || value === null || value === false) continue;
    if (name.startsWith("on")) node.addEventListener(name.slice(2), value);
    else if (value === true) node.setAttribute(name, "");
    else node.setAttribute(name, value);
  }
  for (const child of children.flat(3)) {
    if (child !== undefined && child !== null && child !== false) node.append(child);
  }
  return node;
}

/** show replaces what a node holds. */
export function show(node, ...children) {
  node.replaceChildren(...children.flat(3).filter((c) => c !== undefined && c !== null && c !== false));
}

/** time of day at the bench's own clock, as the browser has it. */
export function clock(iso) {
  return iso ? new Date(iso).toLocaleTimeString([], { hour: "2-digit", minute: "2-digit", second: "2-digit", hourCycle: "h23" }) : "";
}

export function day(iso) {
  return iso ? new Date(iso).toLocaleDateString([], { year: "numeric", month: "short", day: "2-digit" }) : "";
}

/** signed number with a real minus sign. */
export function signed(x, decimals) {
  const text = Math.abs(x).toFixed(decimals);
  return (x < 0 && Number(text) !== 0 ? "−" : "+") + text;
}
