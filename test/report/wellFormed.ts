/** A small reader of well-formed XML-like text, enough to hold a page to its rules. */
export interface Element {
  readonly name: string;
  readonly attributes: Readonly<Record<string, string>>;
  readonly children: (Element | string)[];
}

const TOKEN = /<!DOCTYPE html>|<(\/?)([A-Za-z][\w:-]*)((?:\s+[\w:-]+="[^"<]*")*)\s*(\/?)>|([^<]+)/gy;

/** The root element. Throws at the first place that is not well-formed. */
export function readWellFormed(text: string): Element {
  const root: Element = { name: "", attributes: {}, children: [] };
  const open: Element[] = [root];
  TOKEN.lastIndex = 0;
  let end = 0;
  for (let match = TOKEN.exec(text); match !== null; match = TOKEN.exec(text)) {
    end = TOKEN.lastIndex;
    const [whole, closing, name, attributes, empty, content] = match;
    if (content !== undefined) {
      if (/&(?!(?:amp|lt|gt|quot|#39);)/.test(content)) throw new Error(`a bare & in: ${content.slice(0, 80)}`);
      open.at(-1)!.children.push(content);
    } else if (name !== undefined && closing === "/") {
      const last = open.pop()!;
      if (last.name !== name) throw new Error(`</${name}> closes <${last.name}>`);
    } else if (name !== undefined) {
      const element: Element = { name, attributes: attributesOf(attributes!, whole), children: [] };
      open.at(-1)!.children.push(element);
      if (empty !== "/") open.push(element);
    }
  }
  if (end !== text.length) throw new Error(`not well-formed at: ${text.slice(end, end + 80)}`);
  if (open.length !== 1) throw new Error(`<${open.at(-1)!.name}> is not closed`);
  const elements = root.children.filter((child): child is Element => typeof child !== "string");
  if (elements.length !== 1) throw new Error(`${elements.length} root elements`);
  return elements[0]!;
}

function attributesOf(text: string, whole: string): Record<string, string> {
  const attributes: Record<string, string> = {};
  for (const [, name, value] of text.matchAll(/([\w:-]+)="([^"]*)"/g)) {
    if (Object.hasOwn(attributes, name!)) throw new Error(`${name} twice in ${whole.slice(0, 80)}`);
    attributes[name!] = value!;
  }
  return attributes;
}

/** All elements with a name, in the order of the text. */
export function all(element: Element, name: string): Element[] {
  return element.children.flatMap((child) =>
    typeof child === "string" ? [] : [...(child.name === name ? [child] : []), ...all(child, name)],
  );
}

export function textOf(element: Element): string {
  return element.children.map((child) => (typeof child === "string" ? child : textOf(child))).join("");
}
