declare module 'fft.js' {
  /** Typed arrays serve for its plain ones, if all are of one type. */
  export default class FFT {
    constructor(size: number);
    transform(out: Float64Array, interleaved: Float64Array): void;
    /** Fills bins 0..size/2 of `out`; what lies above is garbage. */
    realTransform(out: Float64Array, real: Float64Array): void;
    /** Scaled by 1/size. */
    inverseTransform(out: Float64Array, interleaved: Float64Array): void;
  }
}
