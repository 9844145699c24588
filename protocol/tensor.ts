/**
 * A matrix on the wire: integers with one scale a row, or plain floats. One scale a row because rows of a read-out or
 * of bounds differ by orders of magnitude, while within a row they do not.
 */
import { ProtocolError } from './errors.ts';

/** Row-major; `data` little-endian, rows × cols elements of `type`; `scales` rows float32 little-endian for i8 and i16, empty for floats. */
export interface Tensor {
  readonly type: 'i8' | 'i16' | 'f32' | 'f64';
  readonly rows: number;
  readonly cols: number;
  readonly scales: Uint8Array;
  readonly data: Uint8Array;
}

/** Element types of a tensor. */
export type TensorType = Tensor['type'];

const ELEMENT_BYTES: Readonly<Record<TensorType, number>> = { i8: 1, i16: 2, f32: 4, f64: 8 };
const LARGEST: Readonly<Record<'i8' | 'i16', number>> = { i8: 127, i16: 32767 };
/** Smallest normal float32; a scale below it would lose its own precision, so such a row is written as zero. */
const SMALLEST_SCALE = 2 ** -126;

const viewOf = (bytes: Uint8Array): DataView => new DataView(bytes.buffer, bytes.byteOffset, bytes.byteLength);

const isQuantised = (type: TensorType): type is 'i8' | 'i16' => type === 'i8' || type === 'i16';

const refuse = (name: string, what: string): never => {
  throw new ProtocolError('tensor', `${name}: ${what}`, { details: { tensor: name } });
};

const writeElement = (view: DataView, type: TensorType, index: number, value: number): void => {
  if (type === 'i8') view.setInt8(index, value);
  else if (type === 'i16') view.setInt16(index * 2, value, true);
  else if (type === 'f32') view.setFloat32(index * 4, value, true);
  else view.setFloat64(index * 8, value, true);
};

const readElement = (view: DataView, type: TensorType, index: number): number => {
  if (type === 'i8') return view.getInt8(index);
  if (type === 'i16') return view.getInt16(index * 2, true);
  if (type === 'f32') return view.getFloat32(index * 4, true);
  return view.getFloat64(index * 8, true);
};

/** Float32 scale of one row; 0 for a row of zeros. */
const rowScale = (values: Float64Array, start: number, cols: number, largest: number): number => {
  let most = 0;
  for (let i = start; i < start + cols; i++) most = Math.max(most, Math.abs(values[i]!));
  const scale = Math.fround(most / largest);
  return scale < SMALLEST_SCALE ? 0 : scale;
};

/**
 * Packs a matrix: i8 and i16 against one float32 scale a row (largest magnitude / 127 or 32767), f32 and f64 as they are.
 *
 * shapes  values (rows × cols), row-major
 * throws  ProtocolError 'tensor' on a length that disagrees, a value that is not finite, or one past float32
 * note    an element is off by at most half its row's scale; a row whose scale falls below 2^-126 becomes zero
 */
export const quantiseTensor = (values: Float64Array, rows: number, cols: number, type: TensorType): Tensor => {
  if (values.length !== rows * cols) {
    refuse('tensor', `expected ${rows} × ${cols} = ${rows * cols} values, got ${values.length}`);
  }
  const data = new Uint8Array(rows * cols * ELEMENT_BYTES[type]);
  const scales = new Uint8Array(isQuantised(type) ? rows * 4 : 0);
  const dataView = viewOf(data);
  const scaleView = viewOf(scales);
  for (let row = 0; row < rows; row++) {
    const scale = isQuantised(type) ? rowScale(values, row * cols, cols, LARGEST[type]) : 1;
    if (!Number.isFinite(scale)) refuse('tensor', `row ${row}: expected finite values within float32, got others`);
    if (isQuantised(type)) scaleView.setFloat32(row * 4, scale, true);
    for (let i = row * cols; i < (row + 1) * cols; i++) {
      const value = values[i]!;
      if (!Number.isFinite(value) || (type === 'f32' && !Number.isFinite(Math.fround(value)))) {
        refuse('tensor', `row ${row}: expected finite values of type ${type}, got ${value}`);
      }
      const whole = isQuantised(type) ? roundTo(value, scale, LARGEST[type]) : value;
      writeElement(dataView, type, i, whole);
    }
  }
  return Object.freeze({ type, rows, cols, scales, data });
};

const roundTo = (value: number, scale: number, largest: number): number => {
  if (scale === 0) return 0;
  return Math.max(-largest, Math.min(largest, Math.round(value / scale)));
};

/**
 * Gives back the matrix: integer × row scale, exact in float64.
 *
 * shapes  result (rows × cols), row-major
 * throws  ProtocolError 'tensor' if the byte lengths disagree with type and shape
 */
export const dequantise = (tensor: Tensor): Float64Array => {
  checkLengths(tensor, 'tensor');
  const { type, rows, cols } = tensor;
  const values = new Float64Array(rows * cols);
  const dataView = viewOf(tensor.data);
  const scaleView = viewOf(tensor.scales);
  for (let row = 0; row < rows; row++) {
    const scale = isQuantised(type) ? scaleView.getFloat32(row * 4, true) : 1;
    for (let i = row * cols; i < (row + 1) * cols; i++) values[i] = readElement(dataView, type, i) * scale;
  }
  return values;
};

const checkLengths = (tensor: Tensor, name: string): void => {
  const { type, rows, cols, data, scales } = tensor;
  const dataBytes = rows * cols * ELEMENT_BYTES[type];
  if (data.length !== dataBytes) {
    refuse(name, `expected ${dataBytes} bytes of data for ${rows} × ${cols} ${type}, got ${data.length}`);
  }
  const scaleBytes = isQuantised(type) ? rows * 4 : 0;
  if (scales.length !== scaleBytes) {
    refuse(name, `expected ${scaleBytes} bytes of scales for ${rows} rows of ${type}, got ${scales.length}`);
  }
};

/**
 * Refuses a tensor that is not what its place in the bundle asks for, or that holds a number which is not finite.
 *
 * shapes  rows × cols as expected by the caller
 * throws  ProtocolError 'tensor' naming the tensor, expected and got
 */
export const checkTensor = (
  tensor: Tensor,
  rows: number,
  cols: number,
  types: readonly TensorType[],
  name = 'tensor',
): void => {
  if (!types.includes(tensor.type)) refuse(name, `expected type ${types.join(' or ')}, got ${tensor.type}`);
  if (tensor.rows !== rows || tensor.cols !== cols) {
    refuse(name, `expected ${rows} × ${cols}, got ${tensor.rows} × ${tensor.cols}`);
  }
  checkLengths(tensor, name);
  const scaleView = viewOf(tensor.scales);
  for (let row = 0; row < tensor.scales.length / 4; row++) {
    const scale = scaleView.getFloat32(row * 4, true);
    if (!(Number.isFinite(scale) && scale >= 0)) refuse(name, `row ${row}: expected a finite scale >= 0, got ${scale}`);
  }
  if (isQuantised(tensor.type)) return;
  const dataView = viewOf(tensor.data);
  for (let i = 0; i < rows * cols; i++) {
    const value = readElement(dataView, tensor.type, i);
    if (!Number.isFinite(value)) refuse(name, `element ${i}: expected a finite number, got ${value}`);
  }
};
