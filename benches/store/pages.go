package store

import (
	"errors"
	"io"

	"github.com/parquet-go/parquet-go/encoding/thrift"
	"github.com/parquet-go/parquet-go/format"
)

// checkChunk walks the page headers of one column chunk without unpacking a
// page, and refuses what the library would believe: sizes beyond the file
// or the bounds, and counts that do not add up to the row group's.
func (t *table) checkChunk(group int, f *field) error {
	rg := &t.file.Metadata().RowGroups[group]
	m := &rg.Columns[f.leaf].MetaData
	damaged := func(why string) error {
		return t.errf("column %q, row group %d: the file is damaged: %s", f.name, group, why)
	}
	if len(m.PathInSchema) != 1 || m.PathInSchema[0] != f.name || m.Type != f.physical {
		return damaged("its chunk belongs to another column")
	}
	if m.NumValues != rg.NumRows {
		return damaged("it does not hold one value a row")
	}
	if m.Codec == format.Lz4Raw || m.Codec == format.Lz4 {
		// parquet-go v0.32.0 gives the wrong buffer of an LZ4 page that packs by less
		// than three (Column.decompress), and never ends on a damaged one.
		return t.errf("column %q is compressed by LZ4, which is not read reliably here; write the file with zstd, snappy, gzip, brotli or no compression", f.name)
	}
	start := m.DataPageOffset
	if m.DictionaryPageOffset != 0 {
		start = m.DictionaryPageOffset
	}
	end := start + m.TotalCompressedSize
	if start < int64(len(magic)) || end < start || end > t.size {
		return damaged("it lies outside the file")
	}
	values, dictionaries := int64(0), 0
	for at := start; at < end; {
		header, n, err := t.pageHeader(at, end)
		if err != nil {
			return damaged("a page header cannot be read")
		}
		packed, unpacked := int64(header.CompressedPageSize), int64(header.UncompressedPageSize)
		at += n + packed
		if packed < 0 || unpacked < 0 || at > end || unpacked > t.limit.pageBytes {
			return damaged("a page has an impossible size")
		}
		if !t.unpacksTo(m.Codec, header, at-packed) {
			return damaged("a page does not unpack to the size it states")
		}
		count := int64(0)
		switch {
		case header.Type == format.DataPage && header.DataPageHeader.Valid:
			count = int64(header.DataPageHeader.V.NumValues)
		case header.Type == format.DataPageV2 && header.DataPageHeaderV2.Valid:
			h := &header.DataPageHeaderV2.V
			count = int64(h.NumValues)
			if h.NumRows != h.NumValues || h.NumNulls < 0 || h.NumNulls > h.NumValues {
				return damaged("a page does not hold one value a row")
			}
		case header.Type == format.DictionaryPage && header.DictionaryPageHeader.Valid:
			dictionaries++
			if n := int64(header.DictionaryPageHeader.V.NumValues); n < 0 || n > unpacked || dictionaries > 1 {
				return damaged("its dictionary is impossible")
			}
		case header.Type == format.IndexPage:
		default:
			return damaged("a page is of no known kind")
		}
		if values += count; count < 0 || values > rg.NumRows {
			return damaged("its pages hold more values than there are rows")
		}
	}
	if values != rg.NumRows {
		return damaged("its pages hold fewer values than there are rows")
	}
	return nil
}

// pageHeader reads the header at an offset, which ends before end, and returns
// how many bytes it takes.
func (t *table) pageHeader(at, end int64) (*format.PageHeader, int64, error) {
	const usualBytes, mostBytes = 1 << 10, 1 << 22 // most have under 100; the rest is statistics on long texts
	for window := int64(usualBytes); ; window *= 64 {
		b := make([]byte, min(window, end-at))
		if _, err := t.input.ReadAt(b, at); err != nil {
			return nil, 0, err
		}
		n, err := skim(b)
		if errors.Is(err, io.ErrUnexpectedEOF) && window < end-at && window < mostBytes {
			continue
		}
		if err != nil {
			return nil, 0, err
		}
		header := new(format.PageHeader)
		if err := thrift.Unmarshal(new(thrift.CompactProtocol), b[:n], header); err != nil {
			return nil, 0, err
		}
		return header, int64(n), nil
	}
}
