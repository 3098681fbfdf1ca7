// Builds the kernel and writes it, as base64, into ../rateKernelWasm.ts: `npm run kernel`.
import { writeFileSync } from "node:fs";
import { join } from "node:path";
import asc from "assemblyscript/asc";

const here = import.meta.dirname;
const options = ["-O3", "--runtime", "stub", "--enable", "simd", "--noAssert", "--use", "abort="];
let binary = null;
const { error, stderr } = await asc.main([join(here, "rateKernel.ts"), "--outFile", "kernel.wasm", ...options], {
  writeFile: (name, contents) => {
    if (name.endsWith(".wasm")) binary = contents;
  },
});
if (error !== null || binary === null) throw new Error(`the kernel does not build: ${error?.message}\n${stderr}`);
const text = Buffer.from(binary).toString("base64");
const lines = text.match(/.{1,100}/g).map((line) => `  "${line}",`);
writeFileSync(
  process.argv[2] ?? join(here, "../rateKernelWasm.ts"),
  `// Made from assembly/rateKernel.ts by 'npm run kernel'; not to be edited.\nexport const RATE_KERNEL = [\n${lines.join("\n")}\n].join("");\n`,
);
