/** Elements made and changed without any text being read as markup. */

const SVG = 'http://www.w3.org/2000/svg';

/** Attributes of an element. */
export type Attributes = Readonly<Record<string, string | number>>;

/** An element with a class and content. */
export function el<K extends keyof HTMLElementTagNameMap>(
  tag: K,
  className = '',
  ...content: (Node | string)[]
): HTMLElementTagNameMap[K] {
  const node = document.createElement(tag);
  if (className !== '') node.className = className;
  node.append(...content);
  return node;
}

/** An element of a drawing. */
export function shape<K extends keyof SVGElementTagNameMap>(
  tag: K,
  attributes: Attributes = {},
): SVGElementTagNameMap[K] {
  const node = document.createElementNS(SVG, tag);
  set(node, attributes);
  return node;
}

/** Sets attributes that differ. */
export function set(node: Element, attributes: Attributes): void {
  for (const [name, value] of Object.entries(attributes))
    if (node.getAttribute(name) !== String(value)) node.setAttribute(name, String(value));
}

/** Replaces text that differs, so that nobody is read the same thing again. */
export function say(node: Element, text: string): void {
  if (node.textContent !== text) node.textContent = text;
}

/** Shows or hides. */
export function show(node: HTMLElement, isShown: boolean): void {
  if (node.hidden === isShown) node.hidden = !isShown;
}
