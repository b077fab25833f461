package strip

// brailleBits holds the dots of a braille cell by column and row, as the
// Unicode Standard numbers them in the block Braille Patterns (U+2800).
var brailleBits = [2][4]uint8{
	{0x01, 0x02, 0x04, 0x40},
	{0x08, 0x10, 0x20, 0x80},
}

// bit returns the mask of one dot within a cell.
func bit(g Glyphs, col, row int) uint8 {
	if g == Braille {
		return brailleBits[col&1][row&3]
	}
	return 1 << (row & 1)
}

// asciiSigns tells the kinds of lines apart where there are no finer glyphs.
var asciiSigns = [...]rune{
	Forecast: '.', Setpoint: '=', Second: 'o', Data: '*',
}

// glyph returns the character for the dots that are set in a cell.
func glyph(g Glyphs, mask uint8, k Kind) rune {
	switch g {
	case Braille:
		return 0x2800 + rune(mask)
	case Block:
		switch mask & 3 {
		case 1:
			return '▀'
		case 2:
			return '▄'
		}
		return '█'
	}
	if int(k) < len(asciiSigns) && asciiSigns[k] != 0 {
		return asciiSigns[k]
	}
	return '*'
}
