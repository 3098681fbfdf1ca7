import { describe, expect, it } from "vitest";
import { isAngleUnit, unitNamed, unitNames, unitsLike } from "../../src/plant/units.js";

describe("units", () => {
  it("convert as the SI brochure (9th ed., tables 4 and 8) and the 3rd CGPM (1901) say", () => {
    const inSi = (value: number, name: string): number => value * unitNamed(name)!.factor;
    expect(inSi(180, "deg")).toBeCloseTo(Math.PI, 15);
    expect(inSi(1, "g")).toBe(9.80665);
    expect(inSi(36, "km/h")).toBeCloseTo(10, 14);
    expect(inSi(1, "h")).toBe(3600);
    expect(inSi(2, "t")).toBe(2000);
    expect(inSi(1, "bar")).toBe(100_000);
    expect(inSi(250, "ms")).toBe(0.25);
    expect(inSi(3, "kN m")).toBe(3000);
  });

  it("have one coherent unit of factor 1 for every quantity", () => {
    for (const name of unitNames()) {
      const unit = unitNamed(name)!;
      expect(unitNamed(unit.si)).toMatchObject({ factor: 1, si: unit.si });
      expect(unit.factor > 0 && Number.isFinite(unit.factor)).toBe(true);
    }
    expect(new Set(unitNames()).size).toBe(unitNames().length);
  });

  it("tell angles from other numbers, and what converts into what", () => {
    expect(["rad", "deg", "mrad"].every((name) => isAngleUnit(unitNamed(name)!))).toBe(true);
    expect(["1", "rad/s", "m", "Hz"].some((name) => isAngleUnit(unitNamed(name)!))).toBe(false);
    expect(unitsLike(unitNamed("deg/s")!)).toEqual(["rad/s", "mrad/s", "deg/s"]);
    expect(unitNamed("metre")).toBeNull();
    expect(unitNamed("constructor")).toBeNull();
  });
});
