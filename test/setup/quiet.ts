// Any console output during a test is unexpected: it fails the test that caused it.
import { afterEach, beforeEach, expect, vi } from "vitest";

const METHODS = ["log", "info", "warn", "error", "debug"] as const;
let spies: ReturnType<typeof vi.spyOn>[] = [];

beforeEach(() => {
  spies = METHODS.map((method) => vi.spyOn(console, method).mockImplementation(() => undefined));
});

afterEach(() => {
  const printed = spies.flatMap((spy) => spy.mock.calls);
  for (const spy of spies) spy.mockRestore();
  expect(printed, "unexpected console output").toEqual([]);
});
