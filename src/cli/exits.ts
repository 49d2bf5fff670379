/** Exit codes of the command: one for each class of outcome. 1 is for verdicts that ask for attention. */
export const exits = { fine: 0, badInput: 2, internal: 3 } as const;
