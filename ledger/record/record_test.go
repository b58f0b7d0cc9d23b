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
	"slices"
	"strings"
	"testing"

	"filippo.io/edwards25519"
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
	cold = am(-4, "F")
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
		KindBottle:         Bottle{Name: "N2-3", Volume: am(50, "L"), Gas: "nitrogen", Pressure: am(2400, "psi"), Temperature: am(41, "F"), Read: when, Label: "nitrogen, technical"},
		KindSettling:       Settling{Unit: unit, Gauge: "G-7", Closed: when, Seconds: Series{Unit: "s", Values: []int64{30, 90}}, Pressures: Series{Exponent: -1, Unit: "psi", Values: []int64{12000, 11905}}, Surrounding: &cold},
		KindHold:           Hold{Start: ID{7}, End: ID{8}, Limit: am(20, "psi"), Document: "CM-29"},
		KindTrace:          Trace{Unit: unit, Gauge: "G-9", Drawn: Series{Unit: "strokes", Values: []int64{0, 1, 2}}, Pressures: Series{Unit: "psi", Values: []int64{3000, 2000, 0}}, Temperature: am(41, "F"), From: "shell", Done: when},
		KindRecall:         Recall{Gauge: "G-7", Since: when, Reason: "15 psi high at calibration"},
		KindSnag:           Snag{Unit: unit, What: "gauge glass cracked", Found: when},
		KindSnagCleared:    SnagCleared{Of: ID{7}, How: "glass replaced", Done: when},
		KindHandover:       Handover{Fingerprint: [32]byte{9}, Open: []string{"HA-40/104 settling"}, Takes: ID{7}},
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

// An independent COSE implementation (veraison/go-cose) verifies every kind of entry, and makes the same bytes.
func TestAnotherCOSELibrary(t *testing.T) {
	verifier, err := cose.NewVerifier(cose.AlgorithmEdDSA, rfcKey(t).Public())
	if err != nil {
		t.Fatal(err)
	}
	signer, err := cose.NewSigner(cose.AlgorithmEdDSA, rfcKey(t))
	if err != nil {
		t.Fatal(err)
	}
	for kind, body := range bodies(t) {
		book := BookID{0xb0}
		v, err := Sign(rfcKey(t), book, entryOf(kind, body))
		if err != nil {
			t.Fatal(err)
		}
		aad := external(book, kind)
		var m cose.Sign1Message
		if err := m.UnmarshalCBOR(v.Raw()); err != nil {
			t.Fatalf("%s: %v", kind, err)
		}
		if err := m.Verify(aad, verifier); err != nil {
			t.Errorf("%s with the book's id: %v", kind, err)
		}
		if err := m.Verify([]byte("another book"), verifier); err == nil {
			t.Errorf("%s verified for another book", kind)
		}
		theirs := cose.NewSign1Message()
		theirs.Headers.Protected[cose.HeaderLabelAlgorithm] = cose.AlgorithmEdDSA
		theirs.Headers.Protected[cose.HeaderLabelContentType] = contentType
		theirs.Headers.Protected[cose.HeaderLabelKeyID] = m.Headers.Protected[cose.HeaderLabelKeyID]
		theirs.Payload = m.Payload
		if err := theirs.Sign(nil, aad, signer); err != nil {
			t.Fatalf("%s: %v", kind, err)
		}
		if raw, err := theirs.MarshalCBOR(); err != nil || !bytes.Equal(raw, v.Raw()) {
			t.Errorf("%s: go-cose wrote %x, %v; want %x", kind, raw, err, v.Raw())
		}
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
func resign(t testing.TB, payload []byte) []byte {
	t.Helper()
	return resignWith(t, header{algEdDSA, contentType, KeyID(rfcKey(t).Public().(ed25519.PublicKey))}, payload)
}

func resignWith(t testing.TB, h any, payload []byte) []byte {
	t.Helper()
	book := BookID{0xb0}
	protected, err := encoding.Marshal(h)
	if err != nil {
		t.Fatal(err)
	}
	tbs, err := toBeSigned(protected, book[:], payload)
	if err != nil {
		t.Fatal(err)
	}
	raw, err := join(protected, payload, ed25519.Sign(rfcKey(t), tbs))
	if err != nil {
		t.Fatal(err)
	}
	return raw
}

func payloadOf(t testing.TB, v Verified) []byte {
	t.Helper()
	var m message
	if err := decoding.Unmarshal(v.Raw()[1:], &m); err != nil {
		t.Fatal(err)
	}
	return m.Payload
}

// A good signature does not save a wrong envelope.
func TestEnvelope(t *testing.T) {
	book, key := BookID{0xb0}, KeyID(rfcKey(t).Public().(ed25519.PublicKey))
	v, err := Sign(rfcKey(t), book, entryOf(KindWithdrawal, bodies(t)[KindWithdrawal]))
	if err != nil {
		t.Fatal(err)
	}
	p := payloadOf(t, v)
	type keys = map[int]any
	for name, c := range map[string]struct {
		raw  []byte
		want error
	}{
		"as it should be":         {resignWith(t, keys{1: -8, 3: contentType, 4: key[:]}, p), nil},
		"another algorithm":       {resignWith(t, keys{1: -7, 3: contentType, 4: key[:]}, p), ErrMalformed},
		"another content type":    {resignWith(t, keys{1: -8, 3: "text/plain", 4: key[:]}, p), ErrMalformed},
		"no key":                  {resignWith(t, keys{1: -8, 3: contentType}, p), ErrNotCanonical},
		"a short key":             {resignWith(t, keys{1: -8, 3: contentType, 4: key[:31]}, p), ErrNotCanonical},
		"a long key":              {resignWith(t, keys{1: -8, 3: contentType, 4: append(key[:], 0)}, p), ErrNotCanonical},
		"one more header":         {resignWith(t, keys{1: -8, 3: contentType, 4: key[:], 5: 0}, p), ErrMalformed},
		"a critical header":       {resignWith(t, keys{1: -8, 2: []int{4}, 3: contentType, 4: key[:]}, p), ErrMalformed},
		"an unprotected header":   {bytes.Replace(v.Raw(), []byte{0xa0, 0x58}, []byte{0xa1, 0x04, 0x40, 0x58}, 1), ErrMalformed},
		"no unprotected header":   {bytes.Replace(v.Raw(), []byte{0xa0, 0x58}, []byte{0xf6, 0x58}, 1), ErrNotCanonical},
		"a signature one short":   {slices.Concat(v.Raw()[:len(v.Raw())-66], []byte{0x58, 63}, v.Raw()[len(v.Raw())-64:len(v.Raw())-1]), ErrNotCanonical},
		"no tag":                  {v.Raw()[1:], ErrMalformed},
		"the tag of COSE_Sign":    {append([]byte{0xd8, 98}, v.Raw()[1:]...), ErrMalformed},
		"nothing":                 {nil, ErrMalformed},
		"cut short":               {v.Raw()[:len(v.Raw())-1], ErrMalformed},
		"a byte more":             {append(bytes.Clone(v.Raw()), 0), ErrMalformed},
		"more than 16 KiB":        {append(bytes.Clone(v.Raw()), make([]byte, MaxSize)...), ErrTooLarge},
		"a length of 2^63 claims": {append([]byte{coseSign1, 0x84, 0x5b, 0x7f}, bytes.Repeat([]byte{0xff}, 7)...), ErrMalformed},
	} {
		if _, err := Verify(c.raw, book); !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", name, err, c.want)
		}
	}
}

// Ed25519 allows S and S + L for one signature unless the verifier insists on S < L (RFC 8032, section 5.1.7).
func TestSecondSpellingOfASignature(t *testing.T) {
	book := BookID{0xb0}
	v, err := Sign(rfcKey(t), book, entryOf(KindWithdrawal, bodies(t)[KindWithdrawal]))
	if err != nil {
		t.Fatal(err)
	}
	raw := bytes.Clone(v.Raw())
	s := raw[len(raw)-32:]
	order := unhex(t, "edd3f55c1a631258d69cf7a2def9de1400000000000000000000000000000010") // L, RFC 8032, section 5.1, little-endian
	for i, carry := 0, 0; i < 32; i++ {
		carry += int(s[i]) + int(order[i])
		s[i], carry = byte(carry), carry>>8
	}
	if _, err := Verify(raw, book); !errors.Is(err, ErrSignature) {
		t.Errorf("S + L: %v", err)
	}
}

func TestWellSignedButNotCanonical(t *testing.T) {
	const head = "0102" + "02582001" + "00000000000000000000000000000000000000000000000000000000000000"
	const tail = "0380" + "04821a6b49d20000" + "05820000" + "066a7769746864726177616c" + "07a2" + "015820" + "0700000000000000000000000000000000000000000000000000000000000000" + "026178"
	seen := func(first string) string { return "5820" + first + strings.Repeat("00", 31) }
	for name, c := range map[string]struct {
		payload string
		want    error
	}{
		"as it should be":        {"a7" + head + tail, nil},
		"a long integer":         {"a7" + "011802" + head[4:] + tail, ErrNotCanonical},
		"keys not sorted":        {"a7" + head[4:] + "0102" + tail, ErrNotCanonical},
		"a key twice":            {"a8" + "0102" + head + tail, ErrMalformed},
		"an unknown key":         {"a8" + head + tail + "0900", ErrMalformed},
		"an indefinite map":      {"bf" + head + tail + "ff", ErrMalformed},
		"number 0":               {"a7" + "0100" + head[4:] + tail, ErrMalformed},
		"number 1 with a prior":  {"a7" + "0101" + head[4:] + tail, ErrMalformed},
		"a float":                {"a7" + "01f94000" + head[4:] + tail, ErrMalformed},
		"number 2 with no prior": {"a6" + "0102" + tail, ErrMalformed},
		"a prior of zeros":       {"a7" + "0102" + "025820" + strings.Repeat("00", 32) + tail, ErrNotCanonical},
		"a null for seen":        {"a7" + head + "03f6" + tail[4:], ErrNotCanonical},
		"seen not sorted":        {"a7" + head + "0382" + seen("03") + seen("02") + tail[4:], ErrMalformed},
		"seen twice":             {"a7" + head + "0382" + seen("03") + seen("03") + tail[4:], ErrMalformed},
		"seen is prior":          {"a7" + head + "0381" + seen("01") + tail[4:], ErrMalformed},
		"a tag":                  {"a7" + "01c102" + head[4:] + tail, ErrMalformed},
	} {
		_, err := Verify(resign(t, unhex(t, c.payload)), BookID{0xb0})
		if !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", name, err, c.want)
		}
	}
}

// The eight points of the small subgroup are found, not recalled: L times any point lies in it, and L P = (L-1) P + P. Each is
// tried in every spelling: y or y + p where that fits, with either sign. Source of L, p and the encoding: RFC 8032, section 5.1.
func TestWeakKeys(t *testing.T) {
	minusOne := edwards25519.NewScalar().Subtract(edwards25519.NewScalar(), must(edwards25519.NewScalar().SetCanonicalBytes(append([]byte{1}, make([]byte, 31)...))))
	small := map[KeyID]bool{}
	for i := 0; i < 256; i++ {
		h := sha256.Sum256([]byte{byte(i)})
		p, err := new(edwards25519.Point).SetBytes(h[:])
		if err != nil {
			continue // half of all strings are no point
		}
		lp := new(edwards25519.Point).ScalarMult(minusOne, p)
		small[KeyID(lp.Add(lp, p).Bytes())] = true
	}
	if len(small) != 8 {
		t.Fatalf("%d points in the small subgroup, want 8", len(small))
	}
	for k := range small {
		for _, sign := range []byte{0, 0x80} {
			low := k
			low[31] = low[31]&0x7f | sign
			spellings := []KeyID{low}
			if low[0] < 19 && bytes.Equal(low[1:31], make([]byte, 30)) && low[31]&0x7f == 0 { // y < 19: y + p is below 2^255
				high := KeyID(bytes.Repeat([]byte{0xff}, 32))
				high[0], high[31] = low[0]+0xed, 0x7f|sign
				spellings = append(spellings, high)
			}
			for _, s := range spellings {
				if err := CheckKey(s); !errors.Is(err, ErrWeakKey) {
					t.Errorf("%s: %v", s, err)
				}
			}
		}
	}
	// An entry that names such a key is refused before its signature is looked at.
	v, err := Sign(rfcKey(t), BookID{0xb0}, entryOf(KindWithdrawal, bodies(t)[KindWithdrawal]))
	if err != nil {
		t.Fatal(err)
	}
	if _, err := Verify(resignWith(t, header{algEdDSA, contentType, KeyID{1}}, payloadOf(t, v)), BookID{0xb0}); !errors.Is(err, ErrWeakKey) {
		t.Errorf("an entry of the identity: %v", err)
	}
	if _, err := Sign(ed25519.PrivateKey{1}, BookID{}, entryOf(KindWithdrawal, bodies(t)[KindWithdrawal])); !errors.Is(err, ErrWeakKey) {
		t.Errorf("a short private key: %v", err)
	}
}

// What a later version adds is kept unread, and held to what every body keeps.
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
	for name, c := range map[string]struct {
		body string
		want error
	}{
		"a map":              {"a20102036161", nil},
		"any depth":          {"a101a1617881f6", nil},
		"no map":             {"6178", ErrMalformed},
		"null":               {"f6", ErrMalformed},
		"a text as key":      {"a1617801", ErrMalformed},
		"keys not sorted":    {"a203616101" + "02", ErrNotCanonical},
		"a key twice":        {"a201010102", ErrMalformed},
		"a long integer":     {"a1011802", ErrNotCanonical},
		"a float":            {"a101f93c00", ErrMalformed},
		"a float of 64 bits": {"a101fb3ff199999999999a", ErrMalformed},
		"a float far inside": {"a10181a1617881fb3ff199999999999a", ErrMalformed},
		"a float as a key":   {"a101a1fb3ff199999999999a00", ErrMalformed},
		"a tag":              {"a101c100", ErrMalformed},
		"indefinite":         {"bf0101ff", ErrMalformed},
		"broken UTF-8":       {"a10161ff", ErrMalformed},
		"too deep":           {"a101" + strings.Repeat("81", 10) + "00", ErrMalformed},
		"more behind":        {"a1010200", ErrMalformed},
	} {
		_, err := EncodeBody("hologram", Unknown{unhex(t, c.body)})
		_, again := DecodeBody("hologram", unhex(t, c.body))
		if !errors.Is(err, c.want) || !errors.Is(again, c.want) {
			t.Errorf("%s: written %v, read %v; want %v", name, err, again, c.want)
		}
	}
	if _, err := EncodeBody(KindReading, Unknown{unhex(t, "a10102")}); !errors.Is(err, ErrMalformed) {
		t.Errorf("unread bytes as a reading: %v", err)
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
		"endless soak":          {KindReading, mangle(func(r *Reading) { m := uint64(maxSoak + 1); r.SoakMin = &m })},
		"long unit":             {KindReading, mangle(func(r *Reading) { r.Pressure.Unit = "psi per fortnight" })},
		"no serial":             {KindReading, mangle(func(r *Reading) { r.Unit.Serial = "" })},
		"bad unit, as left":     {KindCharge, func() any { c := good[KindCharge].(Charge); c.AsLeft.Pressure.Unit = ""; return c }()},
		"bad row of a chart":    {KindSheet, func() any { s := sheet; s.Chart = []ChartRow{row, {}}; return s }()},
		"charge and chart":      {KindSheet, func() any { s := sheet; s.Charge, s.Minus, s.Plus = &psi, &psi, &psi; return s }()},
		"charge, no tolerance":  {KindSheet, func() any { s := sheet; s.Chart, s.Charge = nil, &psi; return s }()},
		"chart with tolerance":  {KindSheet, func() any { s := sheet; s.Plus = &psi; return s }()},
		"due before calibrated": {KindGauge, func() any { g := good[KindGauge].(Gauge); g.Due.Unix--; return g }()},
		"role twice":            {KindHandAdmitted, HandAdmitted{Name: "x", Roles: []Role{RoleLead, RoleLead}, Key: otherID()}},
		"key of no hand":        {KindKeyAdded, KeyAdded{Key: otherID()}},
		"retires no key":        {KindKeyRetired, KeyRetired{Reason: "lost"}},
		"last entry, number 0":  {KindKeyRetired, KeyRetired{Key: otherID(), LastID: ID{1}, Reason: "lost"}},
		"withdraws nothing":     {KindWithdrawal, Withdrawal{Reason: "x"}},
		"countersigns twice":    {KindCountersign, Countersign{Of: []ID{{1}, {1}}, Meaning: "inspected"}},
		"countersigns too much": {KindCountersign, Countersign{Of: make([]ID, 101), Meaning: "inspected"}},
		"corrected body broken": {KindCorrection, Correction{Of: ID{1}, Kind: KindReading, Body: []byte{0xa0}, Reason: "x"}},
		"corrects a correction": {KindCorrection, Correction{Of: ID{1}, Kind: KindCorrection, Body: []byte{0xa0}, Reason: "x"}},
		"a float in correction": {KindCorrection, Correction{Of: ID{1}, Kind: "hologram", Body: []byte{0xa1, 1, 0xf9, 0x3c, 0}, Reason: "x"}},
		"sees nothing":          {KindReading, mangle(func(r *Reading) { r.Seen = []string{""} })},
		"sees too much":         {KindReading, mangle(func(r *Reading) { r.Seen = slices.Repeat([]string{"oil"}, maxNoticed+1) })},
		"clears nothing":        {KindSnagCleared, SnagCleared{How: "x", Done: when}},
		"a snag of nothing":     {KindSnag, Snag{Unit: unit, Found: when}},
		"open without end":      {KindHandover, Handover{Open: slices.Repeat([]string{"x"}, maxOpen+1)}},
		"one value":             {KindTrace, func() any { b := good[KindTrace].(Trace); b.Drawn.Values = b.Drawn.Values[:1]; return b }()},
		"falling seconds":       {KindSettling, func() any { b := good[KindSettling].(Settling); b.Seconds.Values = []int64{90, 30}; return b }()},
		"unlike lengths":        {KindSettling, func() any { b := good[KindSettling].(Settling); b.Seconds.Values = []int64{1, 2, 3}; return b }()},
		"endless series":        {KindTrace, func() any { b := good[KindTrace].(Trace); b.Drawn.Values = make([]int64, maxSeries+1); return b }()},
		"series of no unit":     {KindTrace, func() any { b := good[KindTrace].(Trace); b.Pressures.Unit = ""; return b }()},
		"trace from air":        {KindTrace, func() any { b := good[KindTrace].(Trace); b.From = "air"; return b }()},
		"hold of one reading":   {KindHold, Hold{Start: ID{1}, End: ID{1}, Limit: psi, Document: "x"}},
		"hold of nothing":       {KindHold, Hold{Start: ID{1}, Limit: psi, Document: "x"}},
		"recalls nothing":       {KindRecall, Recall{Since: when, Reason: "x"}},
		"recalls two":           {KindRecall, Recall{Gauge: "G-7", Sheet: ID{1}, Since: when, Reason: "x"}},
		"recall of no reason":   {KindRecall, Recall{Gauge: "G-7", Since: when}},
		"a corrected sheet":     {KindRecall, Recall{Sheet: ID{1}, Since: when, Correction: &psi, Reason: "x"}},
		"bottle of no gas":      {KindBottle, func() any { b := good[KindBottle].(Bottle); b.Gas = ""; return b }()},
		"kind of control":       {"a\nb", Unknown{[]byte{0xa0}}},
		"no body":               {KindReading, nil},
		"body by pointer":       {KindReading, &reading},
		"body of another kind":  {KindCharge, reading},
		"no roles":              {KindHandAdmitted, HandAdmitted{Name: "x", Key: otherID()}},
		"unknown role":          {KindHandAdmitted, HandAdmitted{Name: "x", Roles: []Role{"king"}, Key: otherID()}},
		"weak key":              {KindHandAdmitted, HandAdmitted{Name: "x", Roles: []Role{RoleLead}, Key: KeyID{1}}},
		"no reason":             {KindWithdrawal, Withdrawal{Of: ID{1}}},
		"countersigns nothing":  {KindCountersign, Countersign{Meaning: "inspected"}},
		"neither charge, chart": {KindSheet, func() any { s := sheet; s.Chart = nil; return s }()},
	} {
		if _, err := Sign(rfcKey(t), BookID{}, entryOf(c.kind, c.body)); !errors.Is(err, ErrMalformed) && !errors.Is(err, ErrWeakKey) && !errors.Is(err, ErrNotCanonical) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

// What Verify takes, this package would have written: the entry read encodes to the same payload, and the parts join to the
// same bytes. Every input is tried as an entry, and as a payload under a good signature, since no mutation hits a signature.
func FuzzVerify(f *testing.F) {
	book := BookID{0xb0}
	for kind, body := range bodies(f) {
		v, err := Sign(rfcKey(f), book, entryOf(kind, body))
		if err != nil {
			f.Fatal(err)
		}
		f.Add(v.Raw())
		f.Add(payloadOf(f, v))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		for _, raw := range [][]byte{data, resign(t, data)} {
			v, err := Verify(raw, book)
			if err != nil {
				if v, err = VerifyFounding(raw); err != nil {
					continue
				}
			}
			payload, err := encode(v.Entry())
			if err != nil {
				t.Fatalf("taken %x, but it cannot be written: %v", raw, err)
			}
			protected, err := encoding.Marshal(header{algEdDSA, contentType, v.Key()})
			if err != nil {
				t.Fatal(err)
			}
			if again, err := join(protected, payload, raw[len(raw)-64:]); err != nil || !bytes.Equal(again, raw) {
				t.Errorf("taken %x, written %x, %v", raw, again, err)
			}
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
