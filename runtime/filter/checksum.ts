/**
 * CRC-32 as in ISO 3309 and ITU-T V.42 (polynomial 0xEDB88320 reflected, as zip and Ethernet use it): guards snapshots
 * against damage, not against intent. Our own, since the filter imports nothing of the platform; others take zlib's.
 */

const table = new Uint32Array(256);
for (let n = 0; n < 256; n++) {
  let c = n;
  for (let bit = 0; bit < 8; bit++) c = c & 1 ? 0xedb88320 ^ (c >>> 1) : c >>> 1;
  table[n] = c >>> 0;
}

/**
 * Checksum of bytes from `from` up to `until`.
 *
 * source  ISO 3309:1993; check value of "123456789" is 0xCBF43926
 */
export function crc32(bytes: Uint8Array, from = 0, until: number = bytes.length): number {
  let c = 0xffffffff;
  for (let k = from; k < until; k++) c = table[(c ^ bytes[k]) & 0xff] ^ (c >>> 8);
  return (c ^ 0xffffffff) >>> 0;
}
