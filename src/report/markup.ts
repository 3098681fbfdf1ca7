/** Text for HTML and SVG that is escaped unless it was made here: the only way in which report text becomes markup. */
export class Markup {
  constructor(readonly text: string) {}
}

export type Part = Markup | string | number | null | readonly Part[];

/** Tag of a template: every value is escaped, unless it is Markup; null leaves nothing, a list is joined. */
export function markup(strings: TemplateStringsArray, ...values: readonly Part[]): Markup {
  let text = strings[0]!;
  values.forEach((value, i) => {
    text += textOf(value) + strings[i + 1]!;
  });
  return new Markup(text);
}

function textOf(part: Part): string {
  if (part === null) return "";
  if (part instanceof Markup) return part.text;
  if (typeof part === "string") return escapeText(part);
  if (typeof part === "number") return String(part);
  return part.map(textOf).join("");
}

const ENTITIES: Readonly<Record<string, string>> = {
  "&": "&amp;",
  "<": "&lt;",
  ">": "&gt;",
  '"': "&quot;",
  "'": "&#39;",
};

/** Safe inside an element and inside a quoted attribute. */
export function escapeText(text: string): string {
  return withoutControls(text).replace(/[&<>"']/g, (character) => ENTITIES[character]!);
}

/** Control characters and lone surrogates, which no HTML file may hold, become U+FFFD. */
export function withoutControls(text: string): string {
  return text.replace(/[\p{Cc}\p{Cs}]/gu, (character) => (/[\t\n\r]/.test(character) ? character : "\uFFFD"));
}
