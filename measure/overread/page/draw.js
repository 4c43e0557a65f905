// Elements with attributes, for HTML and SVG.

const SVG = "http://www.w3.org/2000/svg";

function filled(element, attributes, children) {
  for (const [name, value] of Object.entries(attributes)) {
    if (value === false || value === null || value === undefined) continue;
    if (name.startsWith("on")) element.addEventListener(name.slice(2), value);
    else element.setAttribute(name, value === true ? "" : value);
  }
  element.append(...children.filter((child) => child !== null && child !== undefined));
  return element;
}

export const html = (name, attributes = {}, ...children) =>
  filled(document.createElement(name), attributes, children);

export const svg = (name, attributes = {}, ...children) =>
  filled(document.createElementNS(SVG, name), attributes, children);

export const byId = (id) => document.getElementById(id);

// A path through points, lifted where one is missing.
export function pathOf(xs, ys) {
  let path = "", down = false;
  for (let k = 0; k < ys.length; k += 1) {
    if (ys[k] === null) { down = false; continue; }
    path += `${down ? "L" : "M"}${xs(k).toFixed(3)} ${ys[k]}`;
    down = true;
  }
  return path;
}
