/** The unit of a rate: that of the quantity per second, as people write it. */
export function perSecond(unit: string): string {
  const power = /^(.*)\/s(?:\^(\d))?$/.exec(unit);
  if (power !== null) return `${power[1]}/s^${Number(power[2] ?? 1) + 1}`;
  return unit === "1" ? "1/s" : `${unit}/s`;
}
