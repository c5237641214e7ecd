/** Numbers out of the page's base64. */

/** @param {string} base64 @returns {Uint8Array} */
export function bytesOf(base64) {
  const text = atob(base64);
  const bytes = new Uint8Array(text.length);
  for (let i = 0; i < text.length; i++) bytes[i] = text.charCodeAt(i);
  return bytes;
}

/** @param {string} base64 @returns {Float32Array} */
export function floatsOf(base64) {
  return new Float32Array(bytesOf(base64).buffer);
}

/**
 * Little-endian signed whole numbers.
 * @param {string} base64
 * @param {2 | 3 | 4} width bytes of each
 * @returns {Int32Array}
 */
export function integersOf(base64, width) {
  const bytes = bytesOf(base64);
  const values = new Int32Array(bytes.length / width);
  const unused = 32 - 8 * width;
  for (let i = 0, at = 0; i < values.length; i++) {
    let value = 0;
    for (let byte = 0; byte < width; byte++) value |= /** @type {number} */ (bytes[at++]) << (8 * byte);
    values[i] = (value << unused) >> unused;
  }
  return values;
}
