"""Pure numpy kernels: arrays in, arrays out; no files, no state."""
