// Package wav reads and writes multi-channel recordings as RIFF/WAVE files.
//
// Needs: a file that can be read at any place (not a pipe).
// Waits: for nothing; one block at a time is read from the file, never the whole of it.
// Emits: blocks of raw codes with the sample numbers, losses and overloads the writer noted.
// When it cannot: a damaged file gives what is readable and then an error that says where and why (TruncatedError
// when the file ends early).
//
// Read are RIFF and RF64 (EBU Tech 3306), plain and WAVE_FORMAT_EXTENSIBLE headers, 16, 24 and 32 bit PCM and 32 bit
// float, 1 to 256 channels. Written is PCM with an extensible header, RF64 above 4 GB.
//
// What WAVE cannot say (the sample number of the first sample, its time, gaps, overloads, the machine file's hash)
// goes into a chunk of our own, "lwng", holding one JSON object (Meta). Other programs skip it. A recording that
// takes a round trip through this package comes back with the same sample numbers and codes.
package wav
