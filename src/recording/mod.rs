//! Recordings: a folder with `frames.csv` and the frames as 8-bit gray PNG.
