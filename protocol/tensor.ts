/**
 * A matrix on the wire: integers with one scale a row, or plain floats.
 */

/** Row-major; `data` little-endian, rows × cols elements of `type`; `scales` rows float32 little-endian for i8 and i16, empty for floats. */
export interface Tensor {
  readonly type: 'i8' | 'i16' | 'f32' | 'f64';
  readonly rows: number;
  readonly cols: number;
  readonly scales: Uint8Array;
  readonly data: Uint8Array;
}
