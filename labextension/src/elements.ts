/**
 * Elements made of a tag, attributes and text nodes; nothing that comes with a result is ever read as markup.
 */

const SVG = 'http://www.w3.org/2000/svg';

type Attributes = Readonly<Record<string, string | number>>;

/** An HTML element of class `qt-Result-<name>`; an empty name leaves the class out. */
export function html<K extends keyof HTMLElementTagNameMap>(
  tag: K,
  name: string,
  ...content: (Node | string)[]
): HTMLElementTagNameMap[K] {
  const element = document.createElement(tag);
  if (name) {
    element.className = `qt-Result-${name}`;
  }
  element.append(...content);
  return element;
}

/** An SVG element with the attributes given. */
export function svg(tag: string, attributes: Attributes, ...content: (Node | string)[]): SVGElement {
  const element = document.createElementNS(SVG, tag) as SVGElement;
  for (const [name, value] of Object.entries(attributes)) {
    element.setAttribute(name, typeof value === 'number' ? String(Math.round(value * 100) / 100) : value);
  }
  element.append(...content);
  return element;
}

/** Typesets the LaTeX inside an element; resolves to false where that is not possible. */
export type Typeset = (element: HTMLElement) => Promise<boolean>;

/** A formula: at once as plain notation, typeset as soon as that has succeeded. */
export function formula(plain: string, latex: string, typeset: Typeset): HTMLElement {
  const element = html('span', 'formula', plain);
  if (!latex) {
    return element;
  }
  const typesetting = html('span', '', `$${latex}$`);
  void typeset(typesetting).then(succeeded => {
    if (succeeded) {
      element.title = plain;
      element.replaceChildren(typesetting);
    }
  });
  return element;
}
