/** Exit codes of the command: one for each class of outcome. */
export const exits = { fine: 0, attention: 1, badInput: 2, internal: 3 } as const;
