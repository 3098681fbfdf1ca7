/** Version of the tool, as in package.json (held equal by test/cli/version.test.ts). */
export const FAIRLEAD_VERSION = "0.1.0";
