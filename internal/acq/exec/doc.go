// Package exec is a source of samples that come from another program: any that writes interleaved PCM to its standard
// output, such as a sound system's recorder or a maker's own reader.
//
// It needs: the program with its arguments, the format of its samples, their rate.
// It waits: for the first block (Open says when it does not come), then for each; a program that ends, or gives nothing for
// a while, is started anew after a pause that grows from half a second to half a minute.
// It emits: blocks of raw counts of 20 ms. What was lost meanwhile is counted by the clock and stands in the next block with
// the reason. Samples that go missing inside the program show as a lasting delay of all that follows; from a tenth of a
// second on they are counted too. What the program says on standard error goes to the log.
// When it cannot: Read ends with the context's error, or with io.EOF where a program that ends well is the end.
//
// The sample clock is the converter's own and counts from the first sample at the stated rate. How far it goes from the
// machine's clock is in Stats; it is not corrected.
package exec
