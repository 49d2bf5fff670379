// The five-point Laplacian of a rectangle with fixed borders, as readings of differences between scalar neighbours.
import { random } from "./random.js";
import { Stream } from "./stream.js";

/** Unit weights: the information matrix has 4 on the diagonal and −1 at the neighbours. One point a step, by rows. */
export function grid(rows: number, columns: number, seed: number = 1): Stream {
  const stream = new Stream(random(seed));
  for (let i = 0; i < rows; i += 1) {
    for (let j = 0; j < columns; j += 1) {
      const state = stream.addState(1);
      const toBorder = (i === 0 ? 1 : 0) + (j === 0 ? 1 : 0) + (i === rows - 1 ? 1 : 0) + (j === columns - 1 ? 1 : 0);
      for (let k = 0; k < toBorder; k += 1) stream.addMeasurement([state], [[1]], [1]);
      if (j > 0) stream.addMeasurement([state - 1, state], [[-1], [1]], [1]);
      if (i > 0) stream.addMeasurement([state - columns, state], [[-1], [1]], [1]);
      stream.endStep();
    }
  }
  return stream;
}
