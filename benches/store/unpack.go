package store

import (
	"encoding/binary"
	"io"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
	"github.com/parquet-go/parquet-go/format"
)

// unpacker counts what packed pages unpack to. Its readers are kept from page to page.
type unpacker struct {
	gzip *gzip.Reader
	zstd *zstd.Decoder
}

// unpacksTo tells whether the page at an offset unpacks to no more bytes than its
// header states. The library makes room for whatever comes out, so that a
// page of some kilobytes could fill the memory. Snappy states its size; gzip and
// zstd, whose statements may lie or lack, are unpacked into nothing. Brotli
// is let through: the bench's requirements hold no reader of its own for it.
func (t *table) unpacksTo(codec format.CompressionCodec, h *format.PageHeader, at int64) bool {
	size, end := int64(h.UncompressedPageSize), at+int64(h.CompressedPageSize)
	if v2 := &h.DataPageHeaderV2; v2.Valid { // its levels stand before, never compressed
		levels := int64(v2.V.DefinitionLevelsByteLength) + int64(v2.V.RepetitionLevelsByteLength)
		at, size = at+levels, size-levels
		if levels < 0 || size < 0 || at > end {
			return false
		}
		if v2.V.IsCompressed.Valid && !v2.V.IsCompressed.V {
			return true
		}
	}
	packed := io.NewSectionReader(t.input, at, end-at)
	if packed.Size() == 0 {
		return true
	}
	switch codec {
	case format.Snappy:
		var first [binary.MaxVarintLen64]byte
		n, err := packed.ReadAt(first[:], 0)
		stated, used := binary.Uvarint(first[:n])
		return (err == nil || err == io.EOF) && used > 0 && stated <= uint64(size)
	case format.Gzip:
		return t.unpack.openGzip(packed) == nil && atMost(t.unpack.gzip, size)
	case format.Zstd:
		return t.unpack.openZstd(packed, t.limit.pageBytes) == nil && atMost(t.unpack.zstd, size)
	}
	return true
}

func (u *unpacker) openGzip(packed io.Reader) (err error) {
	if u.gzip != nil {
		return u.gzip.Reset(packed)
	}
	u.gzip, err = gzip.NewReader(packed)
	return err
}

// openZstd refuses frames whose window, which is made room for, exceeds the bound.
func (u *unpacker) openZstd(packed io.Reader, windowBytes int64) (err error) {
	if u.zstd != nil {
		return u.zstd.Reset(packed)
	}
	u.zstd, err = zstd.NewReader(packed, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true),
		zstd.WithDecoderMaxWindow(uint64(windowBytes)))
	return err
}

// atMost tells whether r holds at most n bytes and no damage.
func atMost(r io.Reader, n int64) bool {
	got, err := io.Copy(io.Discard, io.LimitReader(r, n+1))
	return err == nil && got <= n
}
