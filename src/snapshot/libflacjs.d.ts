/** The few functions that are used, from libflacjs's release build without WebAssembly. */
declare module 'libflacjs/dist/libflac.min.js' {
  interface StreamInfo {
    min_blocksize: number;
    max_blocksize: number;
    min_framesize: number;
    max_framesize: number;
    total_samples: number;
    md5sum: string;
  }

  const Flac: {
    isReady(): boolean;
    on(event: 'ready', listener: () => void): void;
    /** 0: one of the values is not possible. */
    create_libflac_encoder(
      rateHz: number,
      channels: number,
      bitsPerSample: number,
      compressionLevel: number,
      totalSamples: number,
      verify: boolean,
      blockSize: number,
    ): number;
    /** 0: initialised. */
    init_encoder_stream(
      encoder: number,
      write: (bytes: Uint8Array) => void,
      metadata: (info: StreamInfo | undefined) => void,
    ): number;
    FLAC__stream_encoder_process_interleaved(encoder: number, samples: Int32Array, frames: number): boolean;
    FLAC__stream_encoder_finish(encoder: number): boolean;
    FLAC__stream_encoder_get_state(encoder: number): number;
    FLAC__stream_encoder_delete(encoder: number): void;
  };
  export default Flac;
}
