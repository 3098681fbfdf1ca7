/** Open cells, the largest load first and of equal loads the one that came last (so a part that fails is searched
 * to its end, not everywhere at once): a binary heap (Williams, CACM 7, 1964). */
export interface OpenCell {
  /** Ends of each active coordinate, in [-1, 1]. */
  readonly lower: Float64Array;
  readonly upper: Float64Array;
  /** Halvings from the whole box. */
  readonly depth: number;
  /** Of the cell it came from: how badly it failed. */
  readonly load: number;
}

export interface CellHeap {
  size(): number;
  push(cell: OpenCell): void;
  /** Up to `count` cells, worst first. */
  pop(count: number): OpenCell[];
  /** 0 when empty. */
  worstLoad(): number;
}

export function cellHeap(): CellHeap {
  const items: { cell: OpenCell; order: number }[] = [];
  let pushed = 0;
  const before = (a: number, b: number): boolean => {
    const [x, y] = [items[a]!, items[b]!];
    return x.cell.load === y.cell.load ? x.order > y.order : x.cell.load > y.cell.load;
  };
  const swap = (a: number, b: number): void => {
    const held = items[a]!;
    items[a] = items[b]!;
    items[b] = held;
  };
  const push = (cell: OpenCell): void => {
    items.push({ cell, order: pushed++ });
    let at = items.length - 1;
    while (at > 0 && before(at, (at - 1) >> 1)) {
      swap(at, (at - 1) >> 1);
      at = (at - 1) >> 1;
    }
  };
  const popOne = (): OpenCell => {
    const top = items[0]!.cell;
    const last = items.pop()!;
    if (items.length > 0) {
      items[0] = last;
      for (let at = 0; ; ) {
        let least = at;
        for (const child of [2 * at + 1, 2 * at + 2]) if (child < items.length && before(child, least)) least = child;
        if (least === at) break;
        swap(at, least);
        at = least;
      }
    }
    return top;
  };
  return {
    size: () => items.length,
    push,
    pop: (count) => Array.from({ length: Math.min(count, items.length) }, popOne),
    worstLoad: () => items[0]?.cell.load ?? 0,
  };
}
