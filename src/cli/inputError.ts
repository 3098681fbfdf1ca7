/** Misuse or bad input: exit status 2, the message alone, never a stack. */
export class InputError extends Error {}
