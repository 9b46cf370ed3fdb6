// Arrays in NumPy's NPY format, as the server sends them in bulk.

const elements = { '<f4': Float32Array, '<f8': Float64Array, '<i4': Int32Array, '|u1': Uint8Array };

/**
 * @param {ArrayBuffer} buffer
 * @returns {{shape: number[], data: Float32Array | Float64Array | Int32Array | Uint8Array}} row-major
 */
export function parseNpy(buffer) {
  const bytes = new Uint8Array(buffer);
  if (bytes.length < 10 || String.fromCharCode(...bytes.subarray(1, 6)) !== 'NUMPY' || bytes[0] !== 0x93) {
    throw new Error('npy: this is no NPY file');
  }
  const view = new DataView(buffer);
  const isShort = bytes[6] === 1;
  const headerLength = isShort ? view.getUint16(8, true) : view.getUint32(8, true);
  const start = (isShort ? 10 : 12) + headerLength;
  const header = new TextDecoder().decode(bytes.subarray(isShort ? 10 : 12, start));
  const element = elements[/'descr':\s*'([^']+)'/.exec(header)?.[1]];
  const shape = /'shape':\s*\(([^)]*)\)/
    .exec(header)?.[1]
    .split(',')
    .filter((part) => part.trim())
    .map(Number);
  if (!element || !shape || /'fortran_order':\s*True/.test(header))
    throw new Error(`npy: cannot read ${header.trim()}`);
  const count = shape.reduce((product, extent) => product * extent, 1);
  if (bytes.length < start + count * element.BYTES_PER_ELEMENT) throw new Error('npy: the file is cut short');
  // A copy where the header ends off the element's boundary; NumPy and the server align to 64, others need not.
  const isAligned = start % element.BYTES_PER_ELEMENT === 0;
  const data = isAligned
    ? new element(buffer, start, count)
    : new element(buffer.slice(start, start + count * element.BYTES_PER_ELEMENT));
  return { shape, data };
}
