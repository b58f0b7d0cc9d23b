package record

import (
	"bytes"
	"crypto/ed25519"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"flag"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/fxamacker/cbor/v2"
	"github.com/veraison/go-cose"
)

var update = flag.Bool("update", false, "write the golden bytes anew; a changed golden means a changed format")

func unhex(t testing.TB, s string) []byte {
	t.Helper()
	b, err := hex.DecodeString(s)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// rfcKey is the key of RFC 8032, section 7.1, TEST 1. It is public: never for real use.
func rfcKey(t testing.TB) ed25519.PrivateKey {
	return ed25519.NewKeyFromSeed(unhex(t, "9d61b19deffd5a60ba844af492ec2cc44449c5697b326919703bac031cae7f60"))
}

func otherKey() ed25519.PrivateKey {
	seed := sha256.Sum256([]byte("another"))
	return ed25519.NewKeyFromSeed(seed[:])
}

func otherID() KeyID { return KeyID(otherKey().Public().(ed25519.PublicKey)) }

// Source: RFC 8032, section 7.1, TEST 1 to 3.
func TestRFC8032(t *testing.T) {
	for _, c := range []struct{ seed, public, message, signature string }{
		{"9d61b19deffd5a60ba844af492ec2cc44449c5697b326919703bac031cae7f60", "d75a980182b10ab7d54bfed3c964073a0ee172f3daa62325af021a68f707511a", "", "e5564300c360ac729086e2cc806e828a84877f1eb8e5d974d873e065224901555fb8821590a33bacc61e39701cf9b46bd25bf5f0595bbe24655141438e7a100b"},
		{"4ccd089b28ff96da9db6c346ec114e0f5b8a319f35aba624da8cf6ed4fb8a6fb", "3d4017c3e843895a92b70aa74d1b7ebc9c982ccf2ec4968cc0cd55f12af4660c", "72", "92a009a9f0d4cab8720e820b5f642540a2b27b5416503f8fb3762223ebdb69da085ac1e43e15996e458f3613d0f11d8c387b2eaeb4302aeeb00d291612bb0c00"},
		{"c5aa8df43f9f837bedb7442f31dcb7b166d38535076f094b85ce3a2e0b4458f7", "fc51cd8e6218a1a38da47ed00230f0580816ed13ba3303ac5deb911548908025", "af82", "6291d657deec24024827e69c3abe01a30ce548a284743a445e3680d7db5ac3ac18ff9b538d16f290ae67f760984dc6594a7c15e9716ed28dc027beceea1ec40a"},
	} {
		key := ed25519.NewKeyFromSeed(unhex(t, c.seed))
		if got := hex.EncodeToString(key.Public().(ed25519.PublicKey)); got != c.public {
			t.Errorf("public key %s, want %s", got, c.public)
		}
		if got := hex.EncodeToString(ed25519.Sign(key, unhex(t, c.message))); got != c.signature {
			t.Errorf("signature %s, want %s", got, c.signature)
		}
		if err := CheckKey(KeyID(unhex(t, c.public))); err != nil {
			t.Errorf("key %s: %v", c.public, err)
		}
	}
}

// Source: RFC 8949, section 4.2.1, the order of map keys by their encoded bytes, and appendix A.
func TestRFC8949(t *testing.T) {
	for want, v := range map[string]any{
		"a6" + "0a00" + "186400" + "2000" + "617a00" + "62616100" + "f400": map[any]int{10: 0, 100: 0, -1: 0, "z": 0, "aa": 0, false: 0},
		"1864": 100, "1903e8": 1000, "3863": -100, "6449455446": "IETF", "83010203": []int{1, 2, 3}, "4401020304": []byte{1, 2, 3, 4},
	} {
		got, err := encoding.Marshal(v)
		if err != nil || hex.EncodeToString(got) != want {
			t.Errorf("%v: %x, %v; want %s", v, got, err, want)
		}
	}
}

// Source: testdata/cose-vectors.json, from the COSE working group's examples (eddsa-sig-01).
func TestCOSEVectors(t *testing.T) {
	raw, err := os.ReadFile("../../testdata/cose-vectors.json")
	if err != nil {
		t.Fatal(err)
	}
	var f struct {
		Vectors []struct {
			ID   string `json:"id"`
			TBS  string `json:"to_be_signed_hex"`
			CBOR string `json:"cbor_hex"`
		} `json:"vectors"`
	}
	if err := json.Unmarshal(raw, &f); err != nil {
		t.Fatal(err)
	}
	v := f.Vectors[0]
	if v.ID != "eddsa-examples/eddsa-sig-01" {
		t.Fatalf("the first vector is %s", v.ID)
	}
	var m struct {
		_           struct{} `cbor:",toarray"`
		Protected   []byte
		Unprotected map[int]any
		Payload     []byte
		Signature   []byte
	}
	if err := cbor.Unmarshal(unhex(t, v.CBOR)[1:], &m); err != nil {
		t.Fatal(err)
	}
	tbs, err := toBeSigned(m.Protected, nil, m.Payload)
	if err != nil {
		t.Fatal(err)
	}
	if !strings.EqualFold(hex.EncodeToString(tbs), v.TBS) {
		t.Errorf("to be signed %x, want %s", tbs, v.TBS)
	}
	if !ed25519.Verify(rfcKey(t).Public().(ed25519.PublicKey), tbs, m.Signature) {
		t.Error("the vector's signature does not verify")
	}
	if _, err := VerifyFounding(unhex(t, v.CBOR)); err == nil {
		t.Error("a message that is no entry was taken as one")
	}
}

func am(m int64, unit string) Amount { return Amount{Mantissa: m, Unit: unit} }

var (
	when = Time{Unix: 1930000000, OffsetMin: 120}
	unit = UnitRef{Part: "HA-40", Serial: "104"}
	soak = uint64(45)
	amb  = Amount{Mantissa: 2992, Exponent: -2, Unit: "inHg"}
	row  = ChartRow{Temperature: am(70, "F"), Low: am(950, "psi"), Charge: am(1000, "psi"), High: am(1050, "psi")}
	psi  = am(1000, "psi")
)

func bodies(t testing.TB) map[Kind]any {
	reading := Reading{Unit: unit, Gauge: "G-7", Pressure: am(1180, "psi"), Temperature: am(41, "F"), TemperatureFrom: "shell", SoakMin: &soak, Ambient: &amb, Relieved: "brake pedal until the gauge was dead", FluidPressure: am(0, "psi"), Done: when, Sheet: ID{1}}
	fixed, err := EncodeBody(KindReading, reading)
	if err != nil {
		t.Fatal(err)
	}
	return map[Kind]any{
		KindFounding:       Founding{Title: "Dry Creek", Name: "Founder", Certificate: "L-1", Roles: []Role{RoleLead, RoleTechnician}, PressureUnit: "psi", TemperatureUnit: "F", Format: 1, Nonce: [16]byte{9}},
		KindHandAdmitted:   HandAdmitted{Name: "Tech", Roles: []Role{RoleTechnician}, Key: otherID()},
		KindKeyAdded:       KeyAdded{Hand: KeyID{3}, Key: otherID(), Note: "second laptop"},
		KindKeyRetired:     KeyRetired{Key: otherID(), LastSeq: 4, LastID: ID{5}, Reason: "laptop lost"},
		KindSheet:          Sheet{Part: "HA-40", Gas: "nitrogen", ReferenceTemperature: am(70, "F"), Chart: []ChartRow{row}, SystemPressure: &psi, Document: "CM-29", Revision: "B", Effective: when},
		KindUnitRegistered: UnitRegistered{Part: "HA-40", Serial: "104"},
		KindUnitFitted:     UnitFitted{Unit: unit, Aircraft: "KITE 2", Position: "left brake", When: when},
		KindUnitRemoved:    UnitRemoved{Unit: unit, Reason: "leak", When: when},
		KindGauge:          Gauge{Asset: "G-7", Span: am(3000, "psi"), Accuracy: "ASME 1A", Graduation: am(10, "psi"), Calibrated: when, Due: when, Corrections: []CalPoint{{Reading: psi, Correction: am(-5, "psi")}}},
		KindReading:        reading,
		KindCharge:         Charge{Unit: unit, Gauge: "G-7", AsFound: Observation{Pressure: am(900, "psi"), Temperature: am(41, "F"), TemperatureFrom: "shell"}, AsLeft: Observation{Pressure: am(1000, "psi"), Temperature: am(60, "F"), TemperatureFrom: "shell"}, Relieved: "pedal", FluidPressure: am(0, "psi"), Bottle: "N-3", Gas: "nitrogen", Done: when},
		KindCorrection:     Correction{Of: ID{7}, Kind: KindReading, Body: fixed, Reason: "misread"},
		KindWithdrawal:     Withdrawal{Of: ID{7}, Reason: "wrong unit"},
		KindCountersign:    Countersign{Of: []ID{{7}, {8}}, Meaning: "inspected"},
	}
}

func entryOf(kind Kind, body any) Entry {
	e := Entry{Seq: 2, Prev: ID{1}, Seen: []ID{{2}, {3}}, Signed: when, Clock: HLC{Wall: 1930000000123, Count: 4}, Kind: kind, Body: body}
	switch kind {
	case KindFounding:
		e.Seq, e.Prev, e.Seen = 1, ID{}, nil
	case KindReading, KindCharge:
		c := am(1243, "psi")
		e.Shown = &Shown{Verdict: "conditional pass", Corrected: &c, Core: "1"}
	}
	return e
}

// The golden bytes are the format: when this fails, find another way; a change here breaks every book.
func TestGoldenBytes(t *testing.T) {
	book := BookID{0xb0}
	for kind, body := range bodies(t) {
		v, err := Sign(rfcKey(t), book, entryOf(kind, body))
		if err != nil {
			t.Errorf("%s: %v", kind, err)
			continue
		}
		name := filepath.Join("testdata", "golden", string(kind)+".hex")
		got := hex.EncodeToString(v.Raw()) + "\n"
		if *update {
			if err := errors.Join(os.MkdirAll(filepath.Dir(name), 0o755), os.WriteFile(name, []byte(got), 0o644)); err != nil {
				t.Fatal(err)
			}
		}
		want, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		if got != string(want) {
			t.Errorf("%s: %s, want %s", kind, got, want)
		}
		t.Logf("%s: %d bytes", kind, len(v.Raw()))
		if kind == KindReading && len(v.Raw()) > 512 {
			t.Errorf("a reading takes %d bytes, want under 512", len(v.Raw()))
		}
	}
}

// An independent COSE implementation (veraison/go-cose) verifies our entries.
func TestAnotherCOSELibraryVerifies(t *testing.T) {
	book := BookID{0xb0}
	v, err := Sign(rfcKey(t), book, entryOf(KindReading, bodies(t)[KindReading]))
	if err != nil {
		t.Fatal(err)
	}
	var m cose.Sign1Message
	if err := m.UnmarshalCBOR(v.Raw()); err != nil {
		t.Fatal(err)
	}
	verifier, err := cose.NewVerifier(cose.AlgorithmEdDSA, rfcKey(t).Public())
	if err != nil {
		t.Fatal(err)
	}
	if err := m.Verify(book[:], verifier); err != nil {
		t.Errorf("with the book's id: %v", err)
	}
	if err := m.Verify([]byte("another book"), verifier); err == nil {
		t.Error("it verified for another book")
	}
}

func TestAltered(t *testing.T) {
	book := BookID{0xb0}
	v, err := Sign(rfcKey(t), book, entryOf(KindReading, bodies(t)[KindReading]))
	if err != nil {
		t.Fatal(err)
	}
	for i := range v.Raw() {
		for bit := range 8 {
			raw := bytes.Clone(v.Raw())
			raw[i] ^= 1 << bit
			if _, err := Verify(raw, book); err == nil {
				t.Fatalf("bit %d of byte %d flipped: taken", bit, i)
			}
		}
	}
	if _, err := Verify(v.Raw(), BookID{0xb1}); !errors.Is(err, ErrSignature) {
		t.Errorf("in another book: %v", err)
	}
	if _, err := Verify(append(bytes.Clone(v.Raw()), 0), book); err == nil {
		t.Error("a byte behind the entry: taken")
	}
	f, err := Sign(rfcKey(t), BookID{}, entryOf(KindFounding, bodies(t)[KindFounding]))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Verify(f.Raw(), book); !errors.Is(err, ErrWrongBook) {
		t.Errorf("a founding entry of another book: %v", err)
	}
}

// resign signs a payload as it stands, for forms that Sign would not write.
func resign(t *testing.T, payload []byte) []byte {
	t.Helper()
	key, book := rfcKey(t), BookID{0xb0}
	protected, _ := encoding.Marshal(header{algEdDSA, contentType, KeyID(key.Public().(ed25519.PublicKey))})
	tbs, err := toBeSigned(protected, book[:], payload)
	if err != nil {
		t.Fatal(err)
	}
	raw, err := encoding.Marshal(message{Protected: protected, Payload: payload, Signature: [64]byte(ed25519.Sign(key, tbs))})
	if err != nil {
		t.Fatal(err)
	}
	return append([]byte{coseSign1}, raw...)
}

func TestWellSignedButNotCanonical(t *testing.T) {
	const head = "0102" + "02582001" + "00000000000000000000000000000000000000000000000000000000000000"
	const tail = "0380" + "04821a6b49d20000" + "05820000" + "066a7769746864726177616c" + "07a2" + "015820" + "0700000000000000000000000000000000000000000000000000000000000000" + "026178"
	for name, c := range map[string]struct {
		payload string
		want    error
	}{
		"as it should be":       {"a7" + head + tail, nil},
		"a long integer":        {"a7" + "011802" + head[4:] + tail, ErrNotCanonical},
		"keys not sorted":       {"a7" + head[4:] + "0102" + tail, ErrNotCanonical},
		"a key twice":           {"a8" + "0102" + head + tail, ErrMalformed},
		"an unknown key":        {"a8" + head + tail + "0900", ErrMalformed},
		"an indefinite map":     {"bf" + head + tail + "ff", ErrMalformed},
		"number 0":              {"a7" + "0100" + head[4:] + tail, ErrMalformed},
		"number 1 with a prior": {"a7" + "0101" + head[4:] + tail, ErrMalformed},
		"a float":               {"a7" + "01f94000" + head[4:] + tail, ErrMalformed},
	} {
		_, err := Verify(resign(t, unhex(t, c.payload)), BookID{0xb0})
		if !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", name, err, c.want)
		}
	}
}

// Source: small-order points of edwards25519, from memory; y = 0 is of order 4, y = 1 the
// identity, y = -1 of order 2; and y = p + 1 is a second spelling of the identity.
func TestWeakKeys(t *testing.T) {
	for _, k := range []string{
		"0000000000000000000000000000000000000000000000000000000000000000",
		"0100000000000000000000000000000000000000000000000000000000000000",
		"ecffffffffffffffffffffffffffffffffffffffffffffffffffffffffffff7f",
		"eeffffffffffffffffffffffffffffffffffffffffffffffffffffffffffff7f",
	} {
		if err := CheckKey(KeyID(unhex(t, k))); !errors.Is(err, ErrWeakKey) {
			t.Errorf("%s: %v", k, err)
		}
	}
}

func TestUnknownKindIsKept(t *testing.T) {
	raw, err := encoding.Marshal(map[int]string{1: "from later"})
	if err != nil {
		t.Fatal(err)
	}
	v, err := Sign(rfcKey(t), BookID{0xb0}, entryOf("hologram", Unknown{raw}))
	if err != nil {
		t.Fatal(err)
	}
	if u, ok := v.Entry().Body.(Unknown); !ok || !bytes.Equal(u.Raw, raw) {
		t.Errorf("body %#v", v.Entry().Body)
	}
}

func TestBadBodiesAreRefused(t *testing.T) {
	good := bodies(t)
	reading := good[KindReading].(Reading)
	sheet := good[KindSheet].(Sheet)
	mangle := func(f func(*Reading)) Reading { r := reading; f(&r); return r }
	for name, c := range map[string]struct {
		kind Kind
		body any
	}{
		"fluid side not told":   {KindReading, mangle(func(r *Reading) { r.Relieved = "" })},
		"no unit of pressure":   {KindReading, mangle(func(r *Reading) { r.Pressure.Unit = "" })},
		"huge exponent":         {KindReading, mangle(func(r *Reading) { r.Pressure.Exponent = 10 })},
		"control character":     {KindReading, mangle(func(r *Reading) { r.Note = "a\x1b[2J" })},
		"not UTF-8":             {KindReading, mangle(func(r *Reading) { r.Note = "\xff" })},
		"long note":             {KindReading, mangle(func(r *Reading) { r.Note = strings.Repeat("x", maxText+1) })},
		"impossible offset":     {KindReading, mangle(func(r *Reading) { r.Done.OffsetMin = 900 })},
		"temperature from air":  {KindReading, mangle(func(r *Reading) { r.TemperatureFrom = "air" })},
		"body of another kind":  {KindCharge, reading},
		"no roles":              {KindHandAdmitted, HandAdmitted{Name: "x", Key: otherID()}},
		"unknown role":          {KindHandAdmitted, HandAdmitted{Name: "x", Roles: []Role{"king"}, Key: otherID()}},
		"weak key":              {KindHandAdmitted, HandAdmitted{Name: "x", Roles: []Role{RoleLead}}},
		"no reason":             {KindWithdrawal, Withdrawal{Of: ID{1}}},
		"countersigns nothing":  {KindCountersign, Countersign{Meaning: "inspected"}},
		"neither charge, chart": {KindSheet, func() any { s := sheet; s.Chart = nil; return s }()},
	} {
		if _, err := Sign(rfcKey(t), BookID{}, entryOf(c.kind, c.body)); !errors.Is(err, ErrMalformed) && !errors.Is(err, ErrWeakKey) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func FuzzVerify(f *testing.F) {
	book := BookID{0xb0}
	for kind, body := range bodies(f) {
		v, err := Sign(rfcKey(f), book, entryOf(kind, body))
		if err != nil {
			f.Fatal(err)
		}
		f.Add(v.Raw())
	}
	f.Fuzz(func(t *testing.T, raw []byte) {
		v, err := Verify(raw, book)
		if err != nil {
			return
		}
		if again, err := Sign(rfcKey(t), book, v.Entry()); err == nil && again.Key() == v.Key() && !bytes.Equal(again.Raw(), raw) {
			t.Errorf("taken %x, written %x", raw, again.Raw())
		}
	})
}

func BenchmarkVerify(b *testing.B) {
	book := BookID{0xb0}
	v, err := Sign(rfcKey(b), book, entryOf(KindReading, bodies(b)[KindReading]))
	if err != nil {
		b.Fatal(err)
	}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Verify(v.Raw(), book); err != nil {
			b.Fatal(err)
		}
	}
}
