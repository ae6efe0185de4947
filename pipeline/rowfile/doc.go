// Package rowfile keeps records by row in a file, so that what belongs to a row can be
// read in few pieces. It is for caches: a file can be made again from what it was made of,
// whose identity it carries, and is refused where that is another one or where a byte of
// it has changed.
//
// # Words
//
//   - section: a kind of record, so many a row, all of the same bytes;
//   - record: the bytes that are read and checked as one; records of a section lie one
//     behind the other;
//   - row: the records of all sections, by section.
//
// # The file
//
// A head of headBytes: magic, the length of a JSON text (uint32), that text (the Layout),
// filled up by zeros. Then the rows in their order, each with the CRC-32C (Castagnoli,
// RFC 3720 B.4) of every record (uint32 each), a CRC-32C of those, and the records.
// Numbers are little-endian.
package rowfile
