package protocol

// The CRC is CRC-16/CCITT-FALSE: polynomial 1021, initial value FFFF, no
// reflection, no final exclusive-or; its check value over "123456789" is 29B1.
const (
	crcPoly = 0x1021
	crcInit = 0xFFFF
)

// crcTable is four tables for four bytes a step: crcTable[k][b] is the CRC of
// byte b followed by k zero bytes, from a zero register.
var crcTable = func() (t [4][256]uint16) {
	for b := range 256 {
		r := uint16(b) << 8
		for range 8 {
			if r&0x8000 != 0 {
				r = r<<1 ^ crcPoly
			} else {
				r <<= 1
			}
		}
		t[0][b] = r
	}
	for k := 1; k < 4; k++ {
		for b := range 256 {
			r := t[k-1][b]
			t[k][b] = r<<8 ^ t[0][r>>8]
		}
	}
	return t
}()

// CRC16 returns the CRC-16/CCITT-FALSE of b.
func CRC16(b []byte) uint16 {
	r := uint16(crcInit)
	for len(b) >= 4 {
		r = crcTable[3][b[0]^byte(r>>8)] ^ crcTable[2][b[1]^byte(r)] ^
			crcTable[1][b[2]] ^ crcTable[0][b[3]]
		b = b[4:]
	}
	for _, c := range b {
		r = r<<8 ^ crcTable[0][byte(r>>8)^c]
	}
	return r
}
