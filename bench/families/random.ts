// The seeded generator that the demo draws from as well.
export { type Random, random, xoshiro128 } from "../../src/support/random.js";
