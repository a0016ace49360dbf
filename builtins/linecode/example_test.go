package linecode_test

import (
	"fmt"

	"linewright/builtins/linecode"
	"linewright/builtins/source"
)

// A code of one's own: a 1 is a mark in the first half of the bit, of the sign that keeps the sum at 0 or 1.
func ExampleNew() {
	type st struct{ sum int }
	mine, err := linecode.New(linecode.Spec{
		Name:  "balanced marks",
		Bits:  1,
		Start: st{},
		Step: func(s any, word uint) (any, []float64) {
			v := s.(st)
			if word == 0 {
				return v, []float64{0, 0}
			}
			if v.sum > 0 {
				return st{0}, []float64{-1, 0}
			}
			return st{1}, []float64{1, 0}
		},
	})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(mine.States(), mine.Rate())
	fmt.Println(mine.Encode([]byte{1, 0, 1, 1}))
	// Output:
	// 2 0.5
	// [1 0 0 0 -1 0 1 0] <nil>
}

func ExampleCode_Decode() {
	hdb3 := linecode.HDB3()
	sym, err := hdb3.Encode([]byte{1, 0, 0, 0, 0, 1, 1, 0})
	fmt.Println(sym, err)
	fmt.Println(hdb3.Decode(sym))
	sym[6] = -1 // a second mark of the same sign
	fmt.Println(hdb3.Decode(sym))
	// Output:
	// [1 0 0 0 1 -1 1 0] <nil>
	// [1 0 0 0 0 1 1 0] [] <nil>
	// [1 0 0 0 0 1 1 0] [6] <nil>
}

func ExampleCode_Decodable() {
	lossy, err := linecode.New(linecode.Spec{
		Name: "sign only",
		Bits: 2,
		Step: func(_ any, word uint) (any, []float64) {
			return nil, []float64{float64(word&2) - 1}
		},
	})
	fmt.Println(lossy.Decodable(), err)
	fmt.Println(linecode.HDB3().Decodable())
	// Output:
	// not decodable: the data 01 and 00 give the same symbols <nil>
	// decodable, words known at the latest 6 symbols after their first
}

// Ethernet sends the least significant bit of an octet first.
func ExampleCode_LSBFirst() {
	code := linecode.Code8b10b().LSBFirst()
	fmt.Println(code.Encode(source.Octets([]byte{0x4A}, source.LSBFirst))) // D10.2
	// Output:
	// [-1 1 -1 1 -1 1 -1 1 -1 1] <nil>
}

func ExampleCode_Rate() {
	hdlc := linecode.HDLC()
	fmt.Printf("%.6f\n", hdlc.Rate()) // 62/63
	fmt.Printf("%.6f\n", hdlc.Fed(source.Biased(1)).Rate())
	_, _, fixed := hdlc.FixedRate()
	fmt.Println(fixed)
	// Output:
	// 0.984127
	// 0.833333
	// false
}
