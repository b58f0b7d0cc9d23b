package record_test

import (
	"encoding/hex"
	"fmt"

	"example.org/chargehand/ledger/record"
)

// The entry of the package comment.
func ExampleVerify() {
	raw, err := hex.DecodeString("d2845844a3012703781b6170706c69636174696f6e2f63686172676568616e642b63626f72045820d75a980182b10ab7d54bfed3c964073a0ee172f3daa62325af021a68f707511aa058bea7010202582001000000000000000000000000000000000000000000000000000000000000000382582002000000000000000000000000000000000000000000000000000000000000005820030000000000000000000000000000000000000000000000000000000000000004821a73097680187805821b000001c15cf6e47b04066a7769746864726177616c07a20158200700000000000000000000000000000000000000000000000000000000000000026a77726f6e6720756e69745840fdcc18ecae57d822b0e1d82f145601737f8163bcf8e1379a23025ed90091cf511b23a6f4d0bfbb2a62affe4acb896079c110a810f883e4186b88abe3373ff60c")
	if err != nil {
		fmt.Println(err)
		return
	}
	v, err := record.Verify(raw, record.BookID{0xb0})
	if err != nil {
		fmt.Println(err)
		return
	}
	w := v.Entry().Body.(record.Withdrawal)
	fmt.Println(v.ID().Short(), "of", v.Key().Short(), "number", v.Entry().Seq, "withdraws", w.Of.Short()+":", w.Reason)

	_, err = record.Verify(raw, record.BookID{0xb1})
	fmt.Println(err)
	// Output:
	// 4c23af8b of d75a9801 number 2 withdraws 07000000: wrong unit
	// the signature does not fit the entry and this book
}
