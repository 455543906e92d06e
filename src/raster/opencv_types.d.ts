/** The small part of OpenCV's WebAssembly build that `raster/opencv.ts` uses. */
declare namespace cvTypes {
  interface Mat {
    rows: number;
    cols: number;
    data: Uint8Array;
    data8S: Int8Array;
    data32S: Int32Array;
    data32F: Float32Array;
    data64F: Float64Array;
    delete(): void;
  }
  interface Size {
    width: number;
    height: number;
  }
}
export interface OpenCv {
  Mat: { new (): cvTypes.Mat; new (rows: number, cols: number, type: number): cvTypes.Mat };
  Size: { new (width: number, height: number): cvTypes.Size };
  CV_8UC1: number;
  CV_8U: number;
  CV_32SC1: number;
  CV_32S: number;
  CV_32FC1: number;
  CV_32FC2: number;
  CV_64FC1: number;
  CV_64FC2: number;
  BORDER_CONSTANT: number;
  BORDER_REFLECT_101: number;
  BORDER_REPLICATE: number;
  DFT_INVERSE: number;
  DFT_SCALE: number;
  DFT_REAL_OUTPUT: number;
  DFT_COMPLEX_OUTPUT: number;
  DIST_L2: number;
  DIST_MASK_PRECISE: number;
  GaussianBlur(src: cvTypes.Mat, dst: cvTypes.Mat, size: cvTypes.Size, sx: number, sy: number, border: number): void;
  dft(src: cvTypes.Mat, dst: cvTypes.Mat, flags: number, nonzeroRows: number): void;
  connectedComponents(src: cvTypes.Mat, labels: cvTypes.Mat, connectivity: number, ltype: number): number;
  distanceTransform(src: cvTypes.Mat, dst: cvTypes.Mat, type: number, mask: number): void;
  exceptionFromPtr(pointer: number): { msg: string };
}
export const cv: OpenCv;
declare const whole: { cv: OpenCv };
export default whole;
