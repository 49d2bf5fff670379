/** Turns a residual, in place, into one whose covariance is the unit matrix. It may stand at the beginning of a longer array. */
export type Whiten = (residual: Float64Array) => void;

/** By standard deviations: each number over its own. By a covariance R = L Lᵀ (row-major, positive definite): L⁻¹ r. */
export function whitener(noise: { standardDeviations?: Float64Array; covariance?: Float64Array }): Whiten {
  const { standardDeviations, covariance } = noise;
  if (standardDeviations)
    return (residual) => {
      for (let k = 0; k < standardDeviations.length; k++) residual[k]! /= standardDeviations[k]!;
    };
  const l = cholesky(covariance!);
  const rows = Math.sqrt(l.length);
  return (residual) => {
    for (let i = 0; i < rows; i++) {
      for (let k = 0; k < i; k++) residual[i]! -= l[i * rows + k]! * residual[k]!;
      residual[i]! /= l[i * rows + i]!;
    }
  };
}

function cholesky(matrix: Float64Array): Float64Array {
  const rows = Math.sqrt(matrix.length);
  const l = matrix.slice();
  for (let i = 0; i < rows; i++)
    for (let j = 0; j <= i; j++) {
      for (let k = 0; k < j; k++) l[i * rows + j]! -= l[i * rows + k]! * l[j * rows + k]!;
      l[i * rows + j] = i === j ? Math.sqrt(l[i * rows + i]!) : l[i * rows + j]! / l[j * rows + j]!;
    }
  return l;
}
