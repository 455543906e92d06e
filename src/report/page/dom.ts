import { svgDocument, type Figure } from "../../figures/figure.js";
import { plainText } from "../../model/text.js";

type Child = Node | string | null;
type Attributes = Readonly<Record<string, string | number | boolean | null | undefined>>;

/** An element. Words from data become text nodes, never markup; control characters and marks that turn the writing direction are shown. */
export function h<K extends keyof HTMLElementTagNameMap>(
  tag: K,
  attributes: Attributes = {},
  ...children: readonly Child[]
): HTMLElementTagNameMap[K] {
  const node = document.createElement(tag);
  fill(node, attributes, children);
  return node;
}

export function svg<K extends keyof SVGElementTagNameMap>(
  tag: K,
  attributes: Attributes = {},
  ...children: readonly Child[]
): SVGElementTagNameMap[K] {
  const node = document.createElementNS("http://www.w3.org/2000/svg", tag);
  fill(node, attributes, children);
  return node;
}

function fill(node: Element, attributes: Attributes, children: readonly Child[]): void {
  for (const [k, v] of Object.entries(attributes)) {
    if (v === null || v === undefined || v === false) continue;
    node.setAttribute(k, v === true ? "" : plainText(String(v)));
  }
  for (const c of children) if (c !== null) node.append(typeof c === "string" ? plainText(c) : c);
}

export function on<K extends keyof HTMLElementEventMap, T extends HTMLElement>(
  node: T,
  type: K,
  listener: (e: HTMLElementEventMap[K]) => void,
): T {
  node.addEventListener(type, listener);
  return node;
}

export const button = (label: string, listener: () => void, attributes: Attributes = {}): HTMLButtonElement =>
  on(h("button", { type: "button", ...attributes }, label), "click", listener);

/** A finished drawing as an element; the same text that the program writes into a file, so that it looks the same. Its title and notes
 *  become its text equivalent. */
export function figureNode(figure: Figure): SVGSVGElement {
  const parsed = new DOMParser().parseFromString(svgDocument(figure, "px"), "image/svg+xml").documentElement;
  const node = document.importNode(parsed, true) as Element as SVGSVGElement;
  node.querySelector(":scope > title")?.remove(); // a tooltip over everything
  node.querySelector(":scope > desc")?.remove();
  node.setAttribute("aria-label", plainText(`${figure.title}. ${figure.notes.join(" ")}`));
  node.setAttribute("width", "100%");
  node.removeAttribute("height");
  return node;
}

/** A table that is made when it is opened: the numbers of a figure for those who do not see it. */
export function numbersOf(summary: string, make: () => HTMLTableElement): HTMLDetailsElement {
  const box = h("details", { class: "numbers" }, h("summary", {}, summary));
  box.addEventListener("toggle", () => {
    if (box.open && box.childElementCount === 1) box.append(h("div", { class: "scroll", tabindex: 0 }, make()));
  });
  return box;
}

export function tableOf(head: readonly string[], rows: readonly (readonly Child[])[], caption = ""): HTMLTableElement {
  return h(
    "table",
    {},
    caption === "" ? null : h("caption", {}, caption),
    h("thead", {}, h("tr", {}, ...head.map((c) => h("th", { scope: "col" }, c)))),
    h("tbody", {}, ...rows.map((r) => h("tr", {}, ...r.map((c) => h("td", {}, c))))),
  );
}

export function figureTable(figure: Figure): HTMLTableElement {
  return tableOf(
    figure.table.columns,
    figure.table.rows.map((r) =>
      r.map((v) => (v === null ? "" : typeof v === "number" ? String(Number(v.toPrecision(7))) : v)),
    ),
    figure.title,
  );
}
