// Jacobian blocks of measurements between poses, linearized at their true values.

export interface PlanarPose {
  readonly x: number;
  readonly y: number;
  readonly heading: number;
}

/** The place of b seen from a, turned into a's axes, and the difference of headings: 3 rows. Blocks 3 × 3 on a and on b, row-major. */
export function relativePlanarPose(a: PlanarPose, b: PlanarPose): [number[], number[]] {
  const [c, s] = [Math.cos(a.heading), Math.sin(a.heading)];
  const [dx, dy] = [b.x - a.x, b.y - a.y];
  return [
    [-c, -s, -s * dx + c * dy, s, -c, -c * dx - s * dy, 0, 0, -1],
    [c, s, 0, -s, c, 0, 0, 0, 1],
  ];
}

/** A point seen from a, turned into a's axes: 2 rows. Blocks 2 × 3 on the pose and 2 × 2 on the point. */
export function pointFromPose(a: PlanarPose, point: { x: number; y: number }): [number[], number[]] {
  const [onPose, onPoint] = relativePlanarPose(a, { ...point, heading: 0 });
  return [onPose.slice(0, 6), [onPoint[0]!, onPoint[1]!, onPoint[3]!, onPoint[4]!]];
}

export interface SpatialPose {
  readonly place: readonly [number, number, number];
  /** Rotation matrix, row-major: columns are the pose's axes. */
  readonly axes: readonly number[];
}

/** Small motions of a and b in their own axes (turn, then shift) change the pose of b seen from a by ξ_b − Ad ξ_a, with Ad the adjoint of
 *  the motion from b to a (Murray, Li, Sastry 1994, ch. 2, in this order of turn and shift). Blocks 6 × 6, row-major. */
export function relativeSpatialPose(a: SpatialPose, b: SpatialPose): [number[], number[]] {
  const onA = new Array<number>(36).fill(0);
  const onB = new Array<number>(36).fill(0);
  for (let k = 0; k < 6; k += 1) onB[7 * k] = 1;
  // R = axes_bᵀ axes_a takes a's axes into b's; t = place of a seen from b; [t]× R couples turn into shift.
  const rotation = [0, 1, 2].map((i) =>
    [0, 1, 2].map((j) => [0, 1, 2].reduce((sum, k) => sum + b.axes[3 * k + i]! * a.axes[3 * k + j]!, 0)),
  );
  const shift = a.place.map((v, k) => v - b.place[k]!);
  const t = [0, 1, 2].map((i) => [0, 1, 2].reduce((sum, k) => sum + b.axes[3 * k + i]! * shift[k]!, 0));
  const cross = [
    [0, -t[2]!, t[1]!],
    [t[2]!, 0, -t[0]!],
    [-t[1]!, t[0]!, 0],
  ];
  for (let i = 0; i < 3; i += 1) {
    for (let j = 0; j < 3; j += 1) {
      onA[6 * i + j] = -rotation[i]![j]!;
      onA[6 * (i + 3) + j + 3] = -rotation[i]![j]!;
      onA[6 * (i + 3) + j] = -cross[i]!.reduce((sum, v, k) => sum + v * rotation[k]![j]!, 0);
    }
  }
  return [onA, onB];
}

export const identity = (dimension: number): number[] =>
  Array.from({ length: dimension * dimension }, (_, k) => (k % (dimension + 1) === 0 ? 1 : 0));
