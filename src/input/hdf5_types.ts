/** The parts of h5wasm's types that the reader uses, in one place: it loads the library itself only when it meets an HDF5 file. */
export type { Dataset, Entity, File, Group, Metadata } from "h5wasm/node";
export type H5Module = Awaited<typeof import("h5wasm/node").ready>;
