import { existsSync, readFileSync } from "node:fs";
import { describe, test } from "vitest";
import { fitsToCertifiedDigits } from "../support/fit-strd.js";

const folder = new URL("../../../shared/data/strd/", import.meta.url);

describe("NIST StRD nonlinear fits from start 2: the larger sets, where their files lie in ../shared/data/strd", () => {
  for (const name of ["Kirby2", "Gauss1", "ENSO"])
    test(name, ({ skip }) => {
      const file = new URL(`${name}.json`, folder);
      if (!existsSync(file)) skip(`${name}.json is not at hand`);
      fitsToCertifiedDigits(JSON.parse(readFileSync(file, "utf8")));
    });
});
