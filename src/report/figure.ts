/** What every picture has around it: a heading, the picture with its label, a legend, and what it shows and does not. */
import type { CertificateSummary } from "./artifacts.js";
import { type Markup, markup, type Part } from "./markup.js";
import { certificateStyle } from "./theme.js";

export interface FigureParts {
  readonly title: string;
  readonly picture: Markup;
  readonly legend?: Markup;
  readonly shows: string;
  readonly showsNot: string;
  /** Set on its own, wider than one column. */
  readonly isAlone?: boolean;
}

export function figure({ title, picture, legend, shows, showsNot, isAlone }: FigureParts): Markup {
  return markup`<figure${isAlone ? markup` class="alone"` : null}>
<h3>${title}</h3>
${picture}${legend ?? null}
<figcaption><p>${shows}</p><p><strong>Does not show:</strong> ${showsNot}</p></figcaption>
</figure>
`;
}

export function figures(items: readonly Markup[]): Markup {
  return items.length === 0 ? markup`` : markup`<div class="figures">${items}</div>`;
}

export interface LegendItem {
  /** Content of a 34 by 14 drawing. */
  readonly swatch: Markup;
  readonly text: Part;
}

export function legend(items: readonly LegendItem[]): Markup {
  const entries = items.map(
    ({ swatch, text }) =>
      markup`<li><svg xmlns="http://www.w3.org/2000/svg" viewBox="0 0 34 14" aria-hidden="true">${swatch}</svg>${text}</li>`,
  );
  return markup`<ul class="legend">${entries}</ul>`;
}

export function lineSwatch(color: string, dash: readonly number[]): Markup {
  return markup`<path d="M1 7H33" fill="none" stroke="${color}" stroke-width="2.5" stroke-dasharray="${dash.join(" ")}"/>`;
}

export function boxSwatch(color: string): Markup {
  return markup`<rect x="6" y="1" width="22" height="12" fill="${color}" stroke="var(--muted)" stroke-width="0.5"/>`;
}

export function dotSwatch(color: string): Markup {
  return markup`<circle cx="17" cy="7" r="4" fill="${color}"/>`;
}

export function crossSwatch(color: string): Markup {
  return markup`<path d="M12 2L22 12M22 2L12 12" fill="none" stroke="${color}" stroke-width="2.5"/>`;
}

const SHAPE_PATHS = {
  circle: "M17 2.5a4.5 4.5 0 1 0 0.01 0Z",
  square: "M13 3h8v8h-8Z",
  diamond: "M17 1.5l5.5 5.5l-5.5 5.5l-5.5 -5.5Z",
  "triangle-up": "M17 2l5.5 9.5h-11Z",
  "triangle-down": "M17 12l5.5 -9.5h-11Z",
} as const;

/** Line, dashes and point shape of each certificate. */
export function certificateLegend(certificates: readonly CertificateSummary[], words: (at: number) => string): Markup {
  return legend(
    certificates.map(({ name }, i) => {
      const { color, dash, shape } = certificateStyle(name);
      return {
        swatch: markup`${lineSwatch(color, dash)}<path d="${SHAPE_PATHS[shape]}" fill="${color}"/>`,
        text: words(i),
      };
    }),
  );
}
