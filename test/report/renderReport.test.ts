import { beforeAll, describe, expect, it } from "vitest";
import type { Pictures, Summary } from "../../src/report/artifacts.js";
import { renderReport } from "../../src/report/renderReport.js";
import { BARE, BOAT, CRANE, NOTHING, type Results, ROVER } from "./madeUp.js";
import { grid, picture } from "./madeUpParts.js";
import { all, type Element, readWellFormed, textOf } from "./wellFormed.js";

const RESULTS: Readonly<Record<string, Results>> = { ROVER, CRANE, BOAT, BARE, NOTHING };
const pages = new Map<string, string>();

beforeAll(async () => {
  for (const [name, { summary, pictures }] of Object.entries(RESULTS))
    pages.set(name, await renderReport(summary, pictures));
});

const page = (name: string): string => pages.get(name)!;
const read = (name: string): Element => readWellFormed(page(name));

describe.each(Object.keys(RESULTS))("the page of %s", (name) => {
  it("is well-formed and has each id once", () => {
    const ids = [...page(name).matchAll(/ id="([^"]*)"/g)].map((match) => match[1]);
    expect(read(name).name).toBe("html");
    expect(new Set(ids).size).toBe(ids.length);
  });

  it("refers to what it holds only", () => {
    const references = [...page(name).matchAll(/url\(#([^)]+)\)|aria-labelledby="([^"]+)"/g)].map((m) => m[1] ?? m[2]!);
    for (const reference of references) expect(page(name)).toContain(` id="${reference}"`);
  });

  it("fetches and runs nothing", () => {
    const addresses = page(name).match(/[a-z]+:\/\/[^\s"'<)]*/g) ?? [];
    expect(new Set(addresses)).toEqual(new Set(["http://www.w3.org/2000/svg"]));
    expect(page(name)).not.toMatch(
      /<(?:script|link|img|iframe|object|embed)\b|@import|\bsrc=|href=|url\((?!#)|\son\w+=/i,
    );
  });

  it("starts with the verdict", () => {
    const main = all(read(name), "main")[0]!;
    const first = main.children.find((child): child is Element => typeof child !== "string")!;
    const { holds, text } = RESULTS[name]!.summary.verdict;
    expect(textOf(first)).toMatch(holds ? /✓ Holds/ : /✕ Does not hold/);
    expect(textOf(first)).toContain(text);
  });

  it("says of every picture what it is, what it shows and what it does not", () => {
    for (const svg of all(read(name), "svg")) {
      if (svg.attributes["aria-hidden"] === "true") continue;
      expect(svg.attributes.role).toBe("img");
      expect(svg.attributes["aria-label"]!.length).toBeGreaterThan(20);
    }
    for (const figure of all(read(name), "figure")) {
      expect(textOf(all(figure, "h3")[0]!)).not.toBe("");
      const [shows, showsNot] = all(all(figure, "figcaption")[0]!, "p").map(textOf);
      expect(shows!.length).toBeGreaterThan(20);
      expect(showsNot).toMatch(/^Does not show: .{20}/);
      expect(all(figure, "svg").some(({ attributes }) => attributes.role === "img")).toBe(true);
    }
  });

  it("writes no leftovers of missing values", () => {
    expect(page(name)).not.toMatch(/undefined|NaN|\bnull\b|Infinity|\[object/);
  });

  it("names the standards that it does not replace", () => {
    for (const standard of ["ISO 3691-4", "ISO 18497", "EN 15011", "ISO 13849-1"])
      expect(page(name)).toContain(standard);
  });
});

describe("the report", () => {
  it("has every section in the reader's order", () => {
    const titles = all(read("ROVER"), "h2").map(textOf);
    expect(titles.slice(1)).toEqual([
      "Learned against analytic",
      "The margin to scale",
      "What a smaller margin costs",
      "Where it contracts",
      "Disturbance bound",
      "Missing dynamics",
      "What the logs cover",
      "Training history",
      "Assumptions",
      "Cautions",
      "How to repeat it",
    ]);
  });

  it("rounds margins and authority up", () => {
    const verdict = textOf(all(read("ROVER"), "section")[0]!);
    expect(verdict).toContain("0.144 m"); // 0.1432
    expect(verdict).toContain("40 %"); // 39.912 %
    expect(verdict).toContain("0.0346 %"); // 0.034533 %
  });

  it("gives equal bytes for equal results, also at once", async () => {
    const again = await Promise.all(
      [CRANE, ROVER, CRANE].map(({ summary, pictures }) => renderReport(summary, pictures)),
    );
    expect(again).toEqual([page("CRANE"), page("ROVER"), page("CRANE")]);
  });

  it("takes less than three seconds", async () => {
    const start = performance.now();
    await renderReport(CRANE.summary, CRANE.pictures);
    expect(performance.now() - start).toBeLessThan(3000);
  });

  it("shows no number of a certificate that does not hold, even if one was saved", async () => {
    const poison = { margins: { across: 7.7713 }, authority: { turn: 0.7713 }, rate: 7.7713, tubeRadius: 7.7713 };
    const [learned, constant] = BOAT.summary.certificates;
    const summary: Summary = {
      ...BOAT.summary,
      certificates: [{ ...learned!, ...poison, failingShareUpper: 0.77713, provedShare: 0.7713 }, constant!],
    };
    const pictures: Pictures = {
      ...BOAT.pictures,
      certificates: [
        {
          ...BOAT.pictures.certificates[0]!,
          tradeOff: picture("x", { worstRate: 7.7713, margin: 7.7713 }).tradeOff,
          footprint: [7.7, 0, 7.7],
        },
        BOAT.pictures.certificates[1]!,
      ],
    };
    const shown = await renderReport(summary, pictures);
    expect(shown).toBe(page("BOAT"));
    const rows = all(all(readWellFormed(shown), "table")[0]!, "tr").slice(1);
    expect(
      all(rows[0]!, "td")
        .filter(({ attributes }) => ["Margin", "Authority", "Tube rate"].includes(attributes["data-label"]!))
        .map(textOf),
    ).toEqual(["none", "none", "none"]);
    expect(textOf(rows[0]!)).toContain("✕ fails");
    expect(textOf(rows[1]!)).toContain("0.208 m");
  });

  it("escapes every text of a plant file", async () => {
    const bad = `<script>"x"&'y'</script>\u0007`;
    const { summary, pictures } = ROVER;
    const shown = await renderReport(
      {
        ...summary,
        plant: bad,
        description: bad,
        verdict: { holds: true, text: bad },
        assumptions: [bad],
        cautions: [bad],
        states: summary.states.map((state) => ({ ...state, unit: bad })),
        certificates: summary.certificates.map((certificate) => ({ ...certificate, title: bad, reason: bad })),
        engine: { name: bad, version: bad, rejected: [{ name: bad, reason: bad }] },
        seconds: { [bad]: 1 },
      },
      {
        ...pictures,
        coverage: {
          ...pictures.coverage,
          findings: [bad],
          states: pictures.coverage.states.map((state) => ({ ...state, name: bad, unit: bad })),
        },
        residual: pictures.residual.map((curve) => ({
          ...curve,
          title: bad,
          unit: bad,
          x: { ...curve.x, name: bad, unit: bad },
        })),
      },
    );
    expect(shown.includes("<script")).toBe(false);
    expect(shown.includes("\u0007")).toBe(false);
    expect(textOf(all(readWellFormed(shown), "h1")[0]!)).toContain("&lt;script&gt;&quot;x&quot;&amp;&#39;y&#39;");
  });

  it("refuses a holding certificate that lacks the asked margin", async () => {
    const goal = { name: "sideways", unit: "m", direction: "" };
    await expect(renderReport({ ...ROVER.summary, goal }, ROVER.pictures)).rejects.toThrow(
      /'learned' holds but has no margin 'sideways' \(given: px, py, heading, speed, planar, along, across\)/,
    );
  });

  it("draws what JSON makes of a rate that is not a number as not computed", async () => {
    const [first, ...rest] = ROVER.pictures.certificates;
    const map = first!.rateMap!;
    const rate = JSON.parse(JSON.stringify(map.rate.map((row, j) => (j === 0 ? row.map(() => Number.NaN) : row))));
    const shown = await renderReport(ROVER.summary, {
      ...ROVER.pictures,
      certificates: [{ ...first!, rateMap: { ...map, rate } }, ...rest],
    });
    expect(shown).toContain("not computed");
    expect(page("ROVER")).not.toContain("not computed");
  });

  it("draws no axis of margins where there is no margin", () => {
    expect(page("BOAT")).toContain(">margin 'across' (m)</text>");
    expect(page("NOTHING")).not.toContain(">margin 'trolley' (m)</text>");
  });

  it("says how many violations are drawn", () => {
    expect(page("BOAT")).toContain("The search found 340 violations; the worst 300 are drawn.");
    expect(page("CRANE")).toContain("The search found 3 violations.");
    expect(page("ROVER")).toContain("The search found no violation.");
  });

  it("draws a violation on a map of one coordinate", async () => {
    const only = BARE.pictures.certificates[0]!;
    const shown = await renderReport(BARE.summary, {
      ...BARE.pictures,
      certificates: [
        {
          ...only,
          violations: [{ x: 0.1, y: null, rate: -0.05 }],
          rateMap: { ...only.rateMap!, rate: [grid(21, -0.1, 0.9)] },
        },
      ],
    });
    expect(shown).toContain("violation found by search");
    expect(page("BARE")).not.toContain("violation found by search");
  });

  it("says what is missing instead of drawing nothing", () => {
    for (const words of [
      "No scores of runs were saved.",
      "no residual",
      "No training history of the residual and the metric was saved.",
      "The plant declares no leftover channel.",
      "No assumption was recorded.",
    ])
      expect(page("BARE")).toContain(words);
    for (const words of [
      "there is no tube to draw",
      "there is no trade-off to draw",
      "No rate map was saved",
      "there is no number to use",
    ])
      expect(page("NOTHING")).toContain(words);
  });
});

describe("margins to scale", () => {
  const numbersOf = (path: string): number[] => path.match(/-?\d+(?:\.\d+)?/g)!.map(Number);
  const drawing = (name: string): Element =>
    all(read(name), "svg").find((svg) => /to scale/.test(svg.attributes["aria-label"] ?? ""))!;

  it("holds every band's width against the scale bar", () => {
    const svg = drawing("ROVER");
    const bar = all(svg, "path").find(({ attributes }) => /v8m0 -4H/.test(attributes.d!))!;
    const [barStart, , , , , barEnd] = numbersOf(bar.attributes.d!);
    const pixelsPerMetre = barEnd! - barStart!; // labelled 1 m below
    expect(textOf(all(svg, "text")[0]!)).toBe("1 m");
    const widths = all(svg, "path")
      .filter(({ attributes }) => attributes["fill-opacity"] === "0.16")
      .map(({ attributes }) => {
        const points = numbersOf(attributes.d!);
        return Math.hypot(points[0]! - points.at(-2)!, points[1]! - points.at(-1)!) / pixelsPerMetre;
      });
    expect(widths).toHaveLength(3);
    for (const [i, half] of [0.4127, 0.2541, 0.1432].entries()) expect(widths[i]!).toBeCloseTo(2 * half, 2);
  });

  it("keeps the whole drawing inside its frame", () => {
    for (const name of ["ROVER", "BOAT"]) {
      const svg = drawing(name);
      const [, , width, height] = numbersOf(svg.attributes.viewBox!);
      for (const band of all(svg, "path").filter(({ attributes }) => attributes["fill-opacity"] !== undefined)) {
        numbersOf(band.attributes.d!).forEach((value, i) => {
          expect(value).toBeGreaterThan(0);
          expect(value).toBeLessThan(i % 2 === 0 ? width! : height!);
        });
      }
    }
  });

  it("draws the footprint with the half-axes of its matrix", () => {
    const svg = drawing("BOAT"); // one certificate: its ellipse stands at the middle, where the path falls
    const bar = numbersOf(all(svg, "path").find(({ attributes }) => /v8m0 -4H/.test(attributes.d!))!.attributes.d!);
    const scale = bar[5]! - bar[0]!;
    const ellipse = numbersOf(
      all(svg, "path").find(({ attributes }) => attributes["fill-opacity"] === "0.35")!.attributes.d!,
    );
    const [cx, cy] = ["cx", "cy"].map((key) => Number(all(svg, "circle")[0]!.attributes[key]));
    const radii = Array.from(
      { length: ellipse.length / 2 },
      (_, i) => Math.hypot(ellipse[2 * i]! - cx!, ellipse[2 * i + 1]! - cy!) / scale,
    );
    expect(Math.max(...radii)).toBeCloseTo(Math.sqrt(0.0428), 2);
    expect(Math.min(...radii)).toBeCloseTo(Math.sqrt(0.029), 2);
  });

  it("draws a state's margin against its axis where there is no rotation", () => {
    const svg = drawing("CRANE");
    const bar = all(svg, "path").find(({ attributes }) => attributes["fill-opacity"] === "0.3")!;
    const [left, , right] = numbersOf(bar.attributes.d!);
    const axis = all(svg, "text").filter(({ attributes }) => attributes["text-anchor"] === "middle");
    const place = (text: string): number => Number(axis.find((label) => textOf(label) === text)!.attributes.x);
    const pixelsPerMetre = place("+0.5") - place("−0.5");
    expect((right! - left!) / pixelsPerMetre).toBeCloseTo(2 * 0.3321, 3);
  });
});
