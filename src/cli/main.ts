/**
 * The command line: arguments in, one job or stage, messages and exit status out.
 *   0 done and the certificate holds as asked    2 misuse or bad input
 *   3 done, but it does not hold as asked        1 anything else
 */
import { Command, CommanderError, Option } from "commander";
import { LogError } from "../logs/logError.js";
import { STAGES } from "../pipeline/job.js";
import { RunFolderError } from "../pipeline/runFolder.js";
import { FAIRLEAD_VERSION } from "../pipeline/version.js";
import type { ExitStatus, RefitOptions, RunOptions, Streams } from "./contract.js";
import { doctor } from "./doctor.js";
import { InputError } from "./inputError.js";
import { lineageCommand, pathCommand, recheckCommand, refitCommand, runCommand, stageCommand } from "./runCommand.js";

export async function main(
  args: readonly string[],
  streams: Streams = { out: process.stdout, err: process.stderr },
): Promise<ExitStatus> {
  let status: ExitStatus = 0;
  const stop = new AbortController();
  const onInterrupt = (): void => {
    if (stop.signal.aborted) process.exit(1);
    streamErr("stopping after the present step; press Ctrl-C again to end at once\n");
    stop.abort();
  };
  const streamErr = (text: string): void => {
    streams.err.write(text);
  };
  process.on("SIGINT", onInterrupt);
  process.on("SIGTERM", onInterrupt);
  const program = describe(streams, stop.signal, (code) => {
    status = code;
  });
  try {
    await program.parseAsync(args, { from: "user" });
    return status;
  } catch (error) {
    return explain(error, stop.signal, streamErr);
  } finally {
    process.off("SIGINT", onInterrupt);
    process.off("SIGTERM", onInterrupt);
  }
}

function explain(error: unknown, signal: AbortSignal, print: (text: string) => void): ExitStatus {
  if (error instanceof CommanderError) return error.exitCode === 0 ? 0 : 2;
  if (error instanceof InputError || error instanceof LogError || error instanceof RunFolderError) {
    print(`${error.message}\n`);
    return 2;
  }
  if (signal.aborted) {
    print("stopped; what is in the run folder is whole, and the same command goes on from there\n");
    return 1;
  }
  print(`fairlead failed: ${error instanceof Error ? (error.stack ?? error.message) : String(error)}\n`);
  return 1;
}

function describe(streams: Streams, signal: AbortSignal, finish: (status: ExitStatus) => void): Command {
  const program = new Command("fairlead")
    .description("Tracking margins from recorded runs and a half-known model.")
    .version(FAIRLEAD_VERSION)
    .exitOverride()
    .configureOutput({
      writeOut: (text) => streams.out.write(text),
      writeErr: (text) => streams.err.write(text),
    })
    .showHelpAfterError("(run with --help for what is allowed)");
  const common = (command: Command): Command =>
    command
      .option("--json", "print the machine form to standard output", false)
      .option("--quiet", "no progress on standard error", false);

  common(program.command("run <plant>").description("the whole job: plant file and logs to margin and report"))
    .requiredOption("--out <dir>", "run folder")
    .option("--seed <n>", "seed of everything random; default: the plant file's", wholeNumber)
    .action(async (plant: string, options: RunOptions) => finish(await runCommand(plant, options, streams, signal)));
  for (const stage of STAGES) {
    common(program.command(`${stage.name} <dir>`).description(`one stage: ${stage.title}`)).action(
      async (dir: string, options: Omit<RunOptions, "out">) =>
        finish(await stageCommand(stage, dir, options, streams, signal)),
    );
  }
  common(
    program.command("refit <dir>").description("new logs after a hardware change: test for a change, refit, compare"),
  )
    .requiredOption("--logs <files...>", "the new log files, with the columns of the plant file")
    .requiredOption("--out <dir>", "run folder of the refit")
    .option("--always", "refit although no change is found", false)
    .option("--seed <n>", "seed of everything random; default: the earlier run's", wholeNumber)
    .action(async (dir: string, options: RefitOptions) => finish(await refitCommand(dir, options, streams, signal)));
  common(program.command("path <dir> <plan>").description("the tube along a plan: a table of time, states and inputs"))
    .option("--out <dir>", "folder for the results; default: path-NAME in the run folder")
    .addOption(
      new Option("--law <rate>", "tracking law: the certificate's rate, or the fastest that is proved along the plan")
        .choices(["fixed", "plan"])
        .default("fixed"),
    )
    .action(async (dir: string, plan: string, options: Parameters<typeof pathCommand>[2]) =>
      finish(await pathCommand(dir, plan, options, streams, signal)),
    );
  program
    .command("lineage <dir>")
    .description("a run, the run that it refits, and so on")
    .option("--json", "print the machine form to standard output", false)
    .action((dir: string, options: { json: boolean }) => finish(lineageCommand(dir, options, streams)));
  common(
    program.command("recheck <dir>").description("prove a stored certificate again from its artifacts alone"),
  ).action((dir: string, options: Omit<RunOptions, "out">) => finish(recheckCommand(dir, options, streams)));
  program
    .command("doctor")
    .description("engine, versions and a self-check")
    .option("--json", "print the machine form to standard output", false)
    .action(async (options: { json: boolean }) => finish(await doctor(options, streams)));
  for (const command of program.commands) command.exitOverride().copyInheritedSettings(program);
  return program;
}

function wholeNumber(text: string): number {
  if (!/^\d{1,9}$/.test(text)) {
    throw new InputError(`--seed: given '${text}'; allowed is a whole number from 0 to 999999999`);
  }
  return Number(text);
}
