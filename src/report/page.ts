/** What every page has around its sections: one self-contained file in one style. */
import { Markup, markup, type Part } from "./markup.js";
import { STYLE } from "./theme.js";

export interface PageParts {
  readonly title: string;
  readonly description: string;
  readonly main: readonly Markup[];
  readonly footer: string;
}

export function page({ title, description, main, footer }: PageParts): string {
  return markup`<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8"/>
<meta name="viewport" content="width=device-width, initial-scale=1"/>
<title>${title}</title>
<style>${new Markup(STYLE)}</style>
</head>
<body>
<header><h1>${title}</h1><p>${description}</p></header>
<main>
${main}
</main>
<footer>${footer}</footer>
</body>
</html>
`.text;
}

export function section(id: string, title: string, content: Part): Markup {
  return markup`<section aria-labelledby="${id}">
<h2 id="${id}">${title}</h2>
${content}
</section>
`;
}

export function list(items: readonly string[], empty: string): Markup {
  return items.length === 0
    ? markup`<p class="note">${empty}</p>`
    : markup`<ul>${items.map((item) => markup`<li>${item}</li>`)}</ul>`;
}
