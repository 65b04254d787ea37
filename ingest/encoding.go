package ingest

import (
	"bytes"
	"errors"
	"unicode/utf8"
	"unsafe"

	"golang.org/x/text/encoding"
	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/unicode"
)

// decode turns the bytes of a text file into UTF-8 and says what they were. A
// byte-order mark decides; without one, zero bytes in every second place mean
// UTF-16, valid UTF-8 is UTF-8, and the rest is Windows-1252, which holds
// Latin-1 with its µ and °.
func decode(data []byte) (text, name string, err error) {
	switch {
	case bytes.HasPrefix(data, []byte("\xef\xbb\xbf")):
		data, name = data[3:], "UTF-8 with byte-order mark"
	case bytes.HasPrefix(data, []byte("\xff\xfe")):
		return convert(data[2:], unicode.UTF16(unicode.LittleEndian, unicode.IgnoreBOM), "UTF-16, little endian")
	case bytes.HasPrefix(data, []byte("\xfe\xff")):
		return convert(data[2:], unicode.UTF16(unicode.BigEndian, unicode.IgnoreBOM), "UTF-16, big endian")
	case bytes.IndexByte(data, 0) >= 0:
		even, odd := zeroBytes(data)
		switch {
		case odd > 0 && even*8 < odd:
			return convert(data, unicode.UTF16(unicode.LittleEndian, unicode.IgnoreBOM), "UTF-16, little endian, without byte-order mark")
		case even > 0 && odd*8 < even:
			return convert(data, unicode.UTF16(unicode.BigEndian, unicode.IgnoreBOM), "UTF-16, big endian, without byte-order mark")
		}
		return "", "", errors.New("a binary file")
	default:
		name = "UTF-8"
	}
	if utf8.Valid(data) {
		// The text is the buffer itself: nothing writes to it any more.
		return unsafe.String(unsafe.SliceData(data), len(data)), name, nil
	}
	return convert(data, charmap.Windows1252, "Windows-1252")
}

func convert(data []byte, enc encoding.Encoding, name string) (string, string, error) {
	out, err := enc.NewDecoder().Bytes(data)
	if err != nil {
		return "", "", err
	}
	if bytes.IndexByte(out, 0) >= 0 {
		return "", "", errors.New("a binary file")
	}
	return string(out), name, nil
}

// zeroBytes counts them at even and odd places of the first bytes.
func zeroBytes(data []byte) (even, odd int) {
	for i, b := range data[:min(len(data), 4096)] {
		if b == 0 {
			if i%2 == 0 {
				even++
			} else {
				odd++
			}
		}
	}
	return even, odd
}
