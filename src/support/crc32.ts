// CRC-32, the checksum of ISO 3309 and IEEE 802.3: polynomial 0x04C11DB7, bits reflected, all ones before and after.
// Source: Sarwate, "Computation of cyclic redundancy checks via table look-up", Communications of the ACM 31 (1988).

/** The polynomial with its bits in reverse order. */
const REFLECTED = 0xedb88320;

/** The remainder of each byte. */
const remainders = /* @__PURE__ */ Uint32Array.from({ length: 256 }, (_, byte) => {
  let remainder = byte;
  for (let bit = 0; bit < 8; bit += 1) remainder = remainder & 1 ? (remainder >>> 1) ^ REFLECTED : remainder >>> 1;
  return remainder;
});

/** The checksum of `bytes`, from 0 to 2³² − 1. It differs for sure when up to 32 neighbouring bits do. Cost: one look-up a byte. */
export function crc32(bytes: Uint8Array): number {
  let remainder = 0xffffffff;
  for (let k = 0; k < bytes.length; k += 1) remainder = remainders[(remainder ^ bytes[k]!) & 0xff]! ^ (remainder >>> 8);
  return ~remainder >>> 0;
}
