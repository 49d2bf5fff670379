/** Z := (L·Lᵀ)⁻¹ = L⁻ᵀ·L⁻¹, full symmetric, w × w; L lower triangular, kept, entries above its diagonal not read.
 *  l, z: column-major; z must not overlap l. scratch: inverseScratch(w) bytes.   The diagonal of L must have no zero.
 *  Cost about (2/3)·w³ flops.
 *  With L cut in two, Z₂₂ = (L₂₂L₂₂ᵀ)⁻¹, M = L₂₁L₁₁⁻¹, Z₂₁ = −Z₂₂M, Z₁₁ = (L₁₁L₁₁ᵀ)⁻¹ − MᵀZ₂₁.
 *  Source: Takahashi, Fagan, Chen (1973), "Formation of a Sparse Bus Impedance Matrix and Its Application to Short Circuit Study",
 *  in block form. */
import { bytes, entry, NEGATE, SUBTRACT } from "./mode";
import { multiply } from "./multiply";
import { multiplyTransposedLower } from "./multiply-transposed";
import { solveRight } from "./solve-right";
import { mirror, transposeInto } from "./transpose";

/** Bytes of scratch for order w: M of the outermost cut. */
export function inverseScratch(w: i32): usize {
  return <usize>(w + 1 >> 1) * <usize>(w + 4 >> 1) << 3;
}

/** Order 1 to 4, by the inverse of L; rows that do not exist count as those of the identity. */
function inverseTile(w: i32, l: usize, col: usize, z: usize, ldz: i32): void {
  let d1 = 1.0, d2 = 1.0, d3 = 1.0, l10 = 0.0, l20 = 0.0, l21 = 0.0, l30 = 0.0, l31 = 0.0, l32 = 0.0;
  const d0 = load<f64>(l);
  if (w > 1) { l10 = load<f64>(l, 8); d1 = load<f64>(l + col, 8); }
  if (w > 2) { l20 = load<f64>(l, 16); l21 = load<f64>(l + col, 16); d2 = load<f64>(l + 2 * col, 16); }
  if (w > 3) { l30 = load<f64>(l, 24); l31 = load<f64>(l + col, 24); l32 = load<f64>(l + 2 * col, 24); d3 = load<f64>(l + 3 * col, 24); }
  const m00 = 1 / d0, m11 = 1 / d1, m22 = 1 / d2, m33 = 1 / d3;
  const m10 = -(l10 * m00) * m11;
  const m20 = -(l20 * m00 + l21 * m10) * m22, m21 = -(l21 * m11) * m22;
  const m30 = -(l30 * m00 + l31 * m10 + l32 * m20) * m33, m31 = -(l31 * m11 + l32 * m21) * m33, m32 = -(l32 * m22) * m33;
  store<f64>(z, m00 * m00 + m10 * m10 + m20 * m20 + m30 * m30);
  if (w > 1) {
    store<f64>(z, m10 * m11 + m20 * m21 + m30 * m31, 8);
    store<f64>(entry(z, ldz, 1, 1), m11 * m11 + m21 * m21 + m31 * m31);
  }
  if (w > 2) {
    store<f64>(z, m20 * m22 + m30 * m32, 16);
    store<f64>(entry(z, ldz, 2, 1), m21 * m22 + m31 * m32);
    store<f64>(entry(z, ldz, 2, 2), m22 * m22 + m32 * m32);
  }
  if (w > 3) {
    store<f64>(z, m30 * m33, 24);
    store<f64>(entry(z, ldz, 3, 1), m31 * m33);
    store<f64>(entry(z, ldz, 3, 2), m32 * m33);
    store<f64>(entry(z, ldz, 3, 3), m33 * m33);
  }
  mirror(w, z, ldz);
}

export function inverseOfProduct(w: i32, l: usize, ldl: i32, z: usize, ldz: i32, scratch: usize): void {
  if (w == 0) return;
  if (w <= 4) { inverseTile(w, l, bytes(ldl), z, ldz); return; }
  const w1 = (w + 7 >> 3) << 2, w2 = w - w1; // the first half in whole tiles
  const l21 = l + bytes(w1), z21 = z + bytes(w1), z22 = entry(z, ldz, w1, w1);
  inverseOfProduct(w1, l, ldl, z, ldz, scratch);
  inverseOfProduct(w2, entry(l, ldl, w1, w1), ldl, z22, ldz, scratch);
  for (let j = 0; j < w1; ++j) memory.copy(scratch + bytes(j * w2), entry(l21, ldl, 0, j), bytes(w2));
  solveRight(w2, w1, l, ldl, scratch, w2);
  multiply(w2, w1, w2, z22, ldz, scratch, 1, w2, z21, ldz, NEGATE);
  multiplyTransposedLower(w1, w2, scratch, w2, z21, ldz, z, ldz, SUBTRACT);
  mirror(w1, z, ldz);
  transposeInto(w2, w1, z21, ldz, entry(z, ldz, 0, w1), ldz);
}
