/**
 * Progress on standard error: a bar with the time left on a terminal, a line every few seconds elsewhere. Nothing is
 * shown of a stage that ends within two seconds on a pipe.
 */
import { SingleBar } from "cli-progress";

export interface Progress {
  update(stage: string, done: number, total: number, note: string): void;
  /** Ends the present bar, if any. */
  settle(): void;
}

const QUIET_SECONDS = 2;
const LINE_SECONDS = 5;

export function terminalProgress(stream: NodeJS.WriteStream, now: () => number = () => performance.now()): Progress {
  return stream.isTTY ? barProgress(stream) : lineProgress(stream, now);
}

export const silentProgress: Progress = { update: () => undefined, settle: () => undefined };

function barProgress(stream: NodeJS.WriteStream): Progress {
  let bar: SingleBar | null = null;
  let current = "";
  const settle = (): void => {
    bar?.stop();
    bar = null;
    current = "";
  };
  return {
    settle,
    update: (stage, done, total, note) => {
      if (stage !== current) {
        settle();
        current = stage;
        bar = new SingleBar({
          stream,
          format: "{stage} {bar} {percentage} %, {eta_formatted} left  {note}",
          barCompleteChar: "#",
          barIncompleteChar: ".",
          hideCursor: true,
          clearOnComplete: true,
          etaBuffer: 50,
        });
        bar.start(total, done, { stage: stage.padEnd(9), note });
      } else bar?.update(done, { stage: stage.padEnd(9), note });
    },
  };
}

function lineProgress(stream: NodeJS.WritableStream, now: () => number): Progress {
  let current = "";
  let from = 0;
  let printed = 0;
  return {
    settle: () => {
      current = "";
    },
    update: (stage, done, total, note) => {
      const time = now();
      if (stage !== current) {
        current = stage;
        from = printed = time;
      }
      const elapsed = (time - from) / 1000;
      if (elapsed < QUIET_SECONDS || (time - printed) / 1000 < LINE_SECONDS || done === 0) return;
      printed = time;
      const left = (elapsed * (total - done)) / done;
      stream.write(`${stage}: ${Math.round((100 * done) / total)} %, about ${Math.ceil(left)} s left (${note})\n`);
    },
  };
}
