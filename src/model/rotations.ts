// Rotations in space as unit quaternions [w, x, y, z] (Hamilton's product), with the exponential map of SO(3) and its inverse.
// Source: Bullo, Murray, "Proportional derivative (PD) control on the Euclidean group" (1995), for the derivative of the logarithm;
// Shepperd, "Quaternion from rotation matrix" (1978), for the conventions of quaternion and matrix.

/** A unit quaternion [w, x, y, z]: v ↦ q v q⁻¹ turns body coordinates into map coordinates. q and −q are the same rotation. */
export type Quaternion = readonly [number, number, number, number];
export type Vector3 = readonly [number, number, number];
/** A 3 × 3 matrix, row-major, 9 numbers. */
export type Matrix3 = Float64Array;

export function multiplyQuaternions([aw, ax, ay, az]: Quaternion, [bw, bx, by, bz]: Quaternion): Quaternion {
  return [
    aw * bw - ax * bx - ay * by - az * bz,
    aw * bx + ax * bw + ay * bz - az * by,
    aw * by - ax * bz + ay * bw + az * bx,
    aw * bz + ax * by - ay * bx + az * bw,
  ];
}

/** The inverse of a unit quaternion. */
export function conjugate([w, x, y, z]: Quaternion): Quaternion {
  return [w, -x, -y, -z];
}

/** A length this near 1 is rounding: scaling again would only turn last bits over. */
const unitRounding = 4 * Number.EPSILON;

/** Scaled to unit length, the sign chosen so that w ≥ 0. Doing it twice gives the same bits as once. */
export function normalizeQuaternion([w, x, y, z]: Quaternion): Quaternion {
  const length = Math.hypot(w, x, y, z);
  const scale = (w < 0 ? -1 : 1) / (Math.abs(length - 1) <= unitRounding ? 1 : length);
  return [w * scale, x * scale, y * scale, z * scale];
}

/** Exp: the rotation by |φ| radians about φ. */
export function rotationFromVector([x, y, z]: Vector3): Quaternion {
  const angle = Math.hypot(x, y, z);
  // sin(θ/2)/θ; below 1e-4 the series' next term, θ⁴/3840, is under 3e-20.
  const scale = angle < 1e-4 ? 0.5 - (angle * angle) / 48 : Math.sin(angle / 2) / angle;
  return [Math.cos(angle / 2), scale * x, scale * y, scale * z];
}

/** Log: the vector φ with |φ| ≤ π and Exp(φ) = q. */
export function vectorFromRotation(q: Quaternion): Vector3 {
  const sign = q[0] < 0 ? -1 : 1;
  const w = sign * q[0];
  const s = Math.hypot(q[1], q[2], q[3]);
  // θ/sin(θ/2) with θ = 2 atan2(s, w); at s = 0 its limit is 2.
  const scale = s < 1e-12 ? 2 / w : (2 * Math.atan2(s, w)) / s;
  return [sign * scale * q[1], sign * scale * q[2], sign * scale * q[3]];
}

/** The rotation matrix of a unit quaternion: columns are the body's axes in map coordinates. */
export function rotationMatrix([w, x, y, z]: Quaternion): Matrix3 {
  return Float64Array.of(
    1 - 2 * (y * y + z * z),
    2 * (x * y - w * z),
    2 * (x * z + w * y),
    2 * (x * y + w * z),
    1 - 2 * (x * x + z * z),
    2 * (y * z - w * x),
    2 * (x * z - w * y),
    2 * (y * z + w * x),
    1 - 2 * (x * x + y * y),
  );
}

/** [v]ₓ, the matrix with [v]ₓ u = v × u. */
export function crossMatrix([x, y, z]: Vector3): Matrix3 {
  return Float64Array.of(0, -z, y, z, 0, -x, -y, x, 0);
}

export function multiplyMatrices(a: Matrix3, b: Matrix3): Matrix3 {
  const product = new Float64Array(9);
  for (let i = 0; i < 3; i++)
    for (let j = 0; j < 3; j++) product[3 * i + j] = a[3 * i]! * b[j]! + a[3 * i + 1]! * b[3 + j]! + a[3 * i + 2]! * b[6 + j]!;
  return product;
}

export function transpose(a: Matrix3): Matrix3 {
  return Float64Array.of(a[0]!, a[3]!, a[6]!, a[1]!, a[4]!, a[7]!, a[2]!, a[5]!, a[8]!);
}

/** A v. */
export function apply(a: Matrix3, [x, y, z]: Vector3): Vector3 {
  return [a[0]! * x + a[1]! * y + a[2]! * z, a[3]! * x + a[4]! * y + a[5]! * z, a[6]! * x + a[7]! * y + a[8]! * z];
}

/** The inverse left Jacobian D of SO(3) at φ: Log(Exp(ψ) Exp(φ)) = φ + D ψ + O(|ψ|²). Bullo, Murray (1995), proposition on the logarithm. */
export function logarithmDerivative(phi: Vector3): Matrix3 {
  const angle = Math.hypot(...phi);
  const half = angle / 2;
  // (1 − (θ/2) cot(θ/2)) / θ²; below 1e-3 the series' next term, θ⁴/30240, is under 4e-17.
  const second = angle < 1e-3 ? 1 / 12 + (angle * angle) / 720 : (1 - half / Math.tan(half)) / (angle * angle);
  const cross = crossMatrix(phi);
  const squared = multiplyMatrices(cross, cross);
  return Float64Array.from(cross, (value, k) => (k % 4 === 0 ? 1 : 0) - value / 2 + second * squared[k]!);
}

/** The right Jacobian J of SO(3) at φ: Exp(φ + ε) = Exp(φ) Exp(J ε + O(|ε|²)). Bullo, Murray (1995), the differential of the exponential. */
export function exponentialDerivative(phi: Vector3): Matrix3 {
  const angle = Math.hypot(...phi);
  const squaredAngle = angle * angle;
  // (1 − cos θ)/θ² and (θ − sin θ)/θ³; below 1e-3 the series' next terms are under 1e-15.
  const first = angle < 1e-3 ? 1 / 2 - squaredAngle / 24 : (1 - Math.cos(angle)) / squaredAngle;
  const second = angle < 1e-3 ? 1 / 6 - squaredAngle / 120 : (angle - Math.sin(angle)) / (squaredAngle * angle);
  const cross = crossMatrix(phi);
  const squared = multiplyMatrices(cross, cross);
  return Float64Array.from(cross, (value, k) => (k % 4 === 0 ? 1 : 0) - first * value + second * squared[k]!);
}
