// Package fonts holds the one typeface of Cordwalk, Noto Sans Regular and Bold, for
// screens, charts and paper alike. The files are under the SIL Open Font License 1.1,
// whose text is OFL.txt in this folder. Figures in it have one width, so columns of
// numbers stand straight.
package fonts

import _ "embed"

// Regular is Noto Sans Regular as TrueType data. Do not change the bytes.
//
//go:embed NotoSans-Regular.ttf
var Regular []byte

// Bold is Noto Sans Bold as TrueType data. Do not change the bytes.
//
//go:embed NotoSans-Bold.ttf
var Bold []byte
