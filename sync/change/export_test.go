package change

import "encoding/binary"

// SealWith is Seal with a given nonce.
func SealWith(b Batch, prev Hash, epoch uint32, keys Keys, nonce []byte) (Frame, error) {
	return seal(b, prev, epoch, keys, func(p []byte) (int, error) { return copy(p, nonce), nil })
}

// SealPlain seals any bytes under any header, as a hostile or newer writer might.
func SealPlain(h Header, plain []byte, keys Keys, nonce []byte) []byte {
	h.Length = uint32(len(plain) + Overhead)
	raw := h.append(nil)
	aead, _ := keys.Frames(h.Epoch)
	raw = append(raw, nonce...)
	return aead.Seal(raw, nonce, plain, raw[:HeaderSize])
}

// FixHeader writes a fitting checksum into a header that a test has changed.
func FixHeader(raw []byte) []byte {
	binary.BigEndian.PutUint32(raw[HeaderSize-4:], crc(raw[:HeaderSize-4]))
	return raw
}
