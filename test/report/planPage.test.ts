import { describe, expect, it } from "vitest";
import type { PlanPicture, PlanSummary } from "../../src/report/planArtifacts.js";
import { renderPlanPage } from "../../src/report/planPage.js";
import { all, type Element, readWellFormed, textOf } from "./wellFormed.js";

/** Invented: a plan of 40 rows, a quarter circle in the plane, its margin rising from 0.1 m to 0.2 m; fixed 0.25 m. */
const ROWS = 40;
const RADIUS = 5;
const marginAt = (k: number): number => 0.1 + (0.1 * k) / (ROWS - 1);
const rows: PlanPicture["rows"] = Array.from({ length: ROWS }, (_, k) => ({
  time: 10 + 0.5 * k,
  until: 10.5 + 0.5 * k,
  radius: marginAt(k) / 2,
  sigma: 0.02,
  provedRate: 0.9,
  authority: 0.3,
  margins: [marginAt(k), 0.1, k === 7 ? null : 0.05],
}));
const points = Array.from({ length: ROWS + 1 }, (_, k) => {
  const angle = (Math.PI / 2) * (k / ROWS);
  return { x: RADIUS * Math.sin(angle), y: RADIUS * (1 - Math.cos(angle)), heading: angle };
});
const summary: PlanSummary = {
  plant: "made-up",
  description: "A made-up vehicle.",
  plan: { file: "plan.csv", samples: ROWS + 1, from: 10, until: 30 },
  status: "whole",
  text: "It holds.",
  problems: [],
  end: null,
  fixedHolds: true,
  fixedMisfit: "speed is 2 m/s at 3 s; the fixed tube leaves 0 to 1 m/s",
  law: "the law of a test",
  rate: 0.5,
  fixedRate: 0.5,
  window: 0.5,
  evidence: "proved",
  motionShare: 0.01,
  goal: "planar",
  margins: [
    { name: "planar", unit: "m", fixed: 0.25, largest: 0.2, mean: 0.15 },
    { name: "speed", unit: "m/s", fixed: 0.2, largest: 0.1, mean: 0.1 },
    { name: "across", unit: "m", fixed: 0.2, largest: 0.05, mean: 0.05 },
  ],
  authority: { fixed: 0.3912, largest: 0.3, mean: 0.3, limit: 0.4 },
  radius: { fixed: 0.125, largest: 0.1, mean: 0.075 },
  cells: 12,
  assumptions: ["First.", "Second."],
};
const picture: PlanPicture = { rows, fixedSigma: 0.03, path: { unit: "m", points }, planned: null };
const straight: PlanPicture = { ...picture, path: null, planned: points.map(({ x }) => x) };
const refused: PlanSummary = { ...summary, status: "refused", text: "The plan is refused: speed is 9 m/s." };
const nothing: PlanPicture = { ...picture, rows: [], path: { unit: "m", points: [] } };

const cases = {
  planar: await renderPlanPage(summary, picture),
  straight: await renderPlanPage(summary, straight),
  refused: await renderPlanPage(refused, nothing),
};
const numbersOf = (text: string): number[] => text.match(/-?\d+(?:\.\d+)?/g)!.map(Number);

describe.each(Object.entries(cases))("the page of a %s plan", (_, page) => {
  it("is well-formed, has each id once and fetches nothing", () => {
    expect(readWellFormed(page).name).toBe("html");
    const ids = [...page.matchAll(/ id="([^"]*)"/g)].map((match) => match[1]);
    expect(new Set(ids).size).toBe(ids.length);
    for (const [, reference] of page.matchAll(/url\(#([^)]+)\)/g)) expect(ids).toContain(reference);
    expect(new Set(page.match(/[a-z]+:\/\/[^\s"'<)]*/g) ?? ["http://www.w3.org/2000/svg"])).toEqual(
      new Set(["http://www.w3.org/2000/svg"]),
    );
    expect(page).not.toMatch(/<(?:script|link|img|iframe)\b|@import|\bsrc=|href=|undefined|NaN|\bnull\b|Infinity/);
  });
  it("says of every picture what it is, what it shows and what it does not", () => {
    for (const figure of all(readWellFormed(page), "figure")) {
      const [shows, showsNot] = all(all(figure, "figcaption")[0]!, "p").map(textOf);
      expect(shows!.length).toBeGreaterThan(20);
      expect(showsNot).toMatch(/^Does not show: .{20}/);
      const drawings = all(figure, "svg").filter(({ attributes }) => attributes.role === "img");
      expect(drawings).toHaveLength(1);
      expect(drawings[0]!.attributes["aria-label"]!.length).toBeGreaterThan(20);
    }
  });
});

describe("the page of a plan", () => {
  const root = readWellFormed(cases.planar);
  const drawing = all(root, "svg").find((svg) => /to scale/.test(svg.attributes["aria-label"] ?? ""))!;
  const bands = (): Element[] => all(drawing, "g").map((group) => all(group, "path")[0]!);

  it("puts every margin beside the fixed tube's, rounded up", () => {
    const cells = all(all(root, "table")[0]!, "tr")
      .slice(1)
      .map((row) => all(row, "td").map(textOf));
    expect(cells).toEqual([
      ["m", "0.25", "0.2", "0.15"],
      ["m/s", "0.2", "0.1", "0.1"],
      ["m", "0.2", "0.05", "0.05"],
      ["% of half-range", "39.2", "30", "30"],
      ["metric", "0.125", "0.1", "0.075"],
    ]);
    expect(textOf(root)).toContain("this plan would not fit: speed is 2 m/s at 3 s");
  });

  it("draws both tubes on the scale of the bar", () => {
    const bar = numbersOf(all(drawing, "path").find(({ attributes }) => /v8m0 -4H/.test(attributes.d!))!.attributes.d!);
    expect(textOf(all(drawing, "text")[0]!)).toBe("1 m");
    const scale = bar[5]! - bar[0]!;
    const [fixed, along] = bands().map((band) => numbersOf(band.attributes.d!));
    const height = (values: readonly number[]): number => {
      const y = values.filter((_, i) => i % 2 === 1);
      return (Math.max(...y) - Math.min(...y)) / scale;
    };
    // the path rises by 5 m; discs at its ends add their radius below and above
    expect(height(fixed!)).toBeCloseTo(RADIUS + 2 * 0.25, 2);
    expect(height(along!)).toBeCloseTo(RADIUS + marginAt(0) + marginAt(ROWS - 1), 2);
    const [, , width, tall] = numbersOf(drawing.attributes.viewBox!);
    for (const [i, value] of fixed!.entries()) {
      expect(value).toBeGreaterThan(0);
      expect(value).toBeLessThan(i % 2 === 0 ? width! : tall!);
    }
  });

  it("tells a reader without the charts their range", () => {
    const labels = all(root, "svg").flatMap(({ attributes }) => attributes["aria-label"] ?? []);
    expect(labels).toContain(
      "Margin &#39;planar&#39; over time. Along the plan from 0.1 m to 0.2 m; fixed tube 0.25 m.",
    );
    expect(labels.filter((label) => /over time/.test(label))).toHaveLength(4);
  });

  it("shows the asked state over time where there is no plane", () => {
    expect(cases.straight).toContain("The planned planar and its tube");
    expect(cases.straight).not.toContain("share one scale");
  });

  it("shows no number of a refused plan", () => {
    const text = textOf(readWellFormed(cases.refused));
    expect(text).toContain("✕ Plan refused");
    expect(text).toContain("There is no number to use.");
    expect(all(readWellFormed(cases.refused), "figure")).toEqual([]);
    expect(all(readWellFormed(cases.refused), "table")).toEqual([]);
  });

  it("gives equal bytes for equal results and escapes what came from files", async () => {
    expect(await renderPlanPage(summary, picture)).toBe(cases.planar);
    const bad = `<script>"x"&'y'</script>`;
    const shown = await renderPlanPage(
      { ...summary, plant: bad, description: bad, text: bad, law: bad, assumptions: [bad], fixedMisfit: bad },
      { ...picture, path: { unit: bad, points } },
    );
    expect(shown).not.toContain("<script");
    expect(readWellFormed(shown).name).toBe("html");
  });

  it("refuses a summary without the asked margin", async () => {
    await expect(renderPlanPage({ ...summary, goal: "sideways" }, picture)).rejects.toThrow(/no margin 'sideways'/);
  });

  it("shows nothing of a fixed tube that does not hold", async () => {
    const without: PlanSummary = {
      ...summary,
      fixedHolds: false,
      fixedMisfit: null,
      margins: summary.margins.map((margin) => ({ ...margin, fixed: null })),
      authority: { ...summary.authority, fixed: null },
      radius: { ...summary.radius, fixed: null },
    };
    for (const drawn of [picture, straight]) {
      const shown = await renderPlanPage(without, { ...drawn, fixedSigma: null });
      expect(shown).not.toMatch(/fixed tube[,']|NaN|\bnull\b|0\.25 m/);
      expect(shown).toContain("there is no fixed tube to compare with");
      expect(all(all(readWellFormed(shown), "table")[0]!, "td").filter((cell) => textOf(cell) === "none")).toHaveLength(
        5,
      );
    }
  });

  it("leaves a gap where a row has no margin", async () => {
    const gap = await renderPlanPage({ ...summary, goal: "across" }, picture);
    expect(gap).toContain("Margin &#39;across&#39; over time");
    // two pieces: before and after the row without one
    const line = all(
      all(readWellFormed(gap), "svg").find(({ attributes }) =>
        /over time\. Along/.test(attributes["aria-label"] ?? ""),
      )!,
      "path",
    ).find(({ attributes }) => attributes.stroke === "var(--learned)")!;
    expect(line.attributes.d!.match(/M/g)).toHaveLength(2);
  });
});
