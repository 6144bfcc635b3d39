package clearance

// Arithmetic on eight unsigned bytes in one word (Lamport, "Multiple byte
// processing with full-word instructions", CACM 18(8), 1975; Warren, Hacker's
// Delight, 2nd ed. 2012, §2-18).

const (
	highBits = 0x8080808080808080
	lowSeven = 0x7f7f7f7f7f7f7f7f
	allBytes = 0xffffffffffffffff
)

// spread[b] has byte k set to 255 where bit k of b is set.
var spread = func() (t [256]uint64) {
	for b := range t {
		for k := range 8 {
			if b>>k&1 == 1 {
				t[b] |= 0xff << (8 * k)
			}
		}
	}
	return t
}()

// incBytes adds one to each byte, 255 staying 255.
func incBytes(x uint64) uint64 {
	n := ^x
	room := ((n&lowSeven + lowSeven) | n) & highBits
	return x + room>>7
}

// minBytes is the smaller of each pair of bytes.
func minBytes(x, y uint64) uint64 {
	t := (x | highBits) - (y &^ highBits)
	atLeast := ((x &^ y) | (^(x ^ y) & t)) & highBits // bytes where x >= y
	m := (atLeast >> 7) * 255
	return y&m | x&^m
}
