// Package wav reads and writes WAV files in blocks of frames.
//
// Samples are in full scale: integer codes of b bits are divided by 2^(b−1), floating-point values are taken as they
// are. A file is never trusted: its chunks are walked with bounds first, and no more memory is used than a block takes.
package wav
