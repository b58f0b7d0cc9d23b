package record

// Rules for change: key numbers never change their meaning and are never used again; a new field is optional and takes no
// bytes when unset; there are no floats; a new kind is a new name, and an older chargehand keeps and forwards it unread.

// Kind names what an entry states.
type Kind string

// Kinds.
const (
	KindFounding       Kind = "founding"
	KindHandAdmitted   Kind = "hand-admitted"
	KindKeyAdded       Kind = "key-added"
	KindKeyRetired     Kind = "key-retired"
	KindSheet          Kind = "sheet"
	KindUnitRegistered Kind = "unit-registered"
	KindUnitFitted     Kind = "unit-fitted"
	KindUnitRemoved    Kind = "unit-removed"
	KindGauge          Kind = "gauge"
	KindReading        Kind = "reading"
	KindCharge         Kind = "charge"
	KindCorrection     Kind = "correction"
	KindWithdrawal     Kind = "withdrawal"
	KindCountersign    Kind = "countersign"
	KindBottle         Kind = "bottle"
	KindSettling       Kind = "settling"
	KindHold           Kind = "hold"
	KindTrace          Kind = "trace"
	KindRecall         Kind = "recall"
	KindSnag           Kind = "snag"
	KindSnagCleared    Kind = "snag-cleared"
	KindHandover       Kind = "handover"
)

// Role is what a hand may do.
type Role string

// Roles.
const (
	RoleLead       Role = "lead"
	RoleTechnician Role = "technician"
	RoleInspector  Role = "inspector"
	RoleAuditor    Role = "auditor"
)

// Known tells whether this version knows the role.
func (r Role) Known() bool {
	switch r {
	case RoleLead, RoleTechnician, RoleInspector, RoleAuditor:
		return true
	}
	return false
}

// Amount is a value as a person typed it: Mantissa x 10^Exponent Unit.
type Amount struct {
	_        struct{} `cbor:",toarray"`
	Mantissa int64
	Exponent int
	Unit     string
}

// Time is a wall clock's reading: seconds since 1970-01-01T00:00Z and the zone's offset in minutes.
type Time struct {
	_         struct{} `cbor:",toarray"`
	Unix      int64
	OffsetMin int
}

// HLC is a hybrid logical clock: later than every entry its signer had seen.
type HLC struct {
	_     struct{} `cbor:",toarray"`
	Wall  int64    // milliseconds since 1970
	Count uint32
}

// UnitRef names a unit by part number and serial.
type UnitRef struct {
	_      struct{} `cbor:",toarray"`
	Part   string
	Serial string
}

// Founding starts a book; its signer is the founder.
type Founding struct {
	Title           string   `cbor:"1,keyasint"`
	Name            string   `cbor:"2,keyasint"`
	Certificate     string   `cbor:"3,keyasint,omitempty"`
	Roles           []Role   `cbor:"4,keyasint"`
	PressureUnit    string   `cbor:"5,keyasint"` // what a bare number means
	TemperatureUnit string   `cbor:"6,keyasint"`
	Format          uint     `cbor:"7,keyasint"`
	Nonce           [16]byte `cbor:"8,keyasint"` // two books of one founder and title differ
}

// HandAdmitted lets a person in, named from then on by this first key; for a hand already in, it changes name and roles.
type HandAdmitted struct {
	Name        string `cbor:"1,keyasint"`
	Certificate string `cbor:"2,keyasint,omitempty"`
	Roles       []Role `cbor:"3,keyasint"`
	Key         KeyID  `cbor:"4,keyasint"`
}

// KeyAdded gives a hand another key, for another laptop.
type KeyAdded struct {
	Hand KeyID  `cbor:"1,keyasint"`
	Key  KeyID  `cbor:"2,keyasint"`
	Note string `cbor:"3,keyasint,omitempty"`
}

// KeyRetired ends a key's line after LastSeq (0: from its start). LastID, where given, also chooses the branch of a fork.
type KeyRetired struct {
	Key     KeyID  `cbor:"1,keyasint"`
	LastSeq uint64 `cbor:"2,keyasint"`
	LastID  ID     `cbor:"3,keyasint,omitzero"`
	Reason  string `cbor:"4,keyasint"`
}

// ChartRow is one row of a manual's chart.
type ChartRow struct {
	_                 struct{} `cbor:",toarray"`
	Temperature       Amount
	Low, Charge, High Amount
}

// Sheet is the approved limits of a type: a reference charge with tolerances, or a chart.
type Sheet struct {
	Part                 string     `cbor:"1,keyasint"`
	Construction         string     `cbor:"2,keyasint,omitempty"`
	Gas                  string     `cbor:"3,keyasint"`
	GasVolume            *Amount    `cbor:"4,keyasint,omitempty"`
	GasVolumeTolerance   *Amount    `cbor:"5,keyasint,omitempty"`
	SystemPressure       *Amount    `cbor:"6,keyasint,omitempty"`
	LeastUseful          *Amount    `cbor:"7,keyasint,omitempty"`
	Application          *Amount    `cbor:"8,keyasint,omitempty"`
	ReferenceTemperature Amount     `cbor:"9,keyasint"`
	Charge               *Amount    `cbor:"10,keyasint,omitempty"`
	Minus                *Amount    `cbor:"11,keyasint,omitempty"`
	Plus                 *Amount    `cbor:"12,keyasint,omitempty"`
	Chart                []ChartRow `cbor:"13,keyasint,omitempty"`
	Ambient              *Amount    `cbor:"14,keyasint,omitempty"`
	Leak                 *Amount    `cbor:"15,keyasint,omitempty"`
	Valve                string     `cbor:"16,keyasint,omitempty"`
	ValveRating          *Amount    `cbor:"17,keyasint,omitempty"`
	Torque               string     `cbor:"18,keyasint,omitempty"`
	InstalledGauge       bool       `cbor:"19,keyasint,omitempty"`
	TempLow              *Amount    `cbor:"20,keyasint,omitempty"`
	TempHigh             *Amount    `cbor:"21,keyasint,omitempty"`
	Document             string     `cbor:"22,keyasint"`
	Revision             string     `cbor:"23,keyasint"`
	Effective            Time       `cbor:"24,keyasint"`
}

// UnitRegistered makes a unit known.
type UnitRegistered struct {
	Part   string `cbor:"1,keyasint"`
	Serial string `cbor:"2,keyasint"`
	Note   string `cbor:"3,keyasint,omitempty"`
}

// UnitFitted says where a unit was fitted.
type UnitFitted struct {
	Unit     UnitRef `cbor:"1,keyasint"`
	Aircraft string  `cbor:"2,keyasint"`
	Position string  `cbor:"3,keyasint"`
	When     Time    `cbor:"4,keyasint"`
}

// UnitRemoved says that a unit was taken off.
type UnitRemoved struct {
	Unit   UnitRef `cbor:"1,keyasint"`
	Reason string  `cbor:"2,keyasint"`
	When   Time    `cbor:"3,keyasint"`
}

// CalPoint is one row of a calibration certificate.
type CalPoint struct {
	_                   struct{} `cbor:",toarray"`
	Reading, Correction Amount
}

// Gauge describes a pressure gauge by its asset number; a later entry of the number replaces an earlier one.
type Gauge struct {
	Asset                 string     `cbor:"1,keyasint"`
	Span                  Amount     `cbor:"2,keyasint"`
	Accuracy              string     `cbor:"3,keyasint"` // "ASME 1A", "EN 1.6" or "0.5%"
	Graduation            Amount     `cbor:"4,keyasint"`
	Calibrated            Time       `cbor:"5,keyasint"`
	Due                   Time       `cbor:"6,keyasint"`
	Certificate           string     `cbor:"7,keyasint,omitempty"`
	Corrections           []CalPoint `cbor:"8,keyasint,omitempty"`
	CorrectionUncertainty *Amount    `cbor:"9,keyasint,omitempty"`
}

// Reading is an as-found check.
type Reading struct {
	Unit            UnitRef `cbor:"1,keyasint"`
	Gauge           string  `cbor:"2,keyasint"`
	Pressure        Amount  `cbor:"3,keyasint"`
	Temperature     Amount  `cbor:"4,keyasint"`
	TemperatureFrom string  `cbor:"5,keyasint"` // "shell", "ambient" or "unknown"
	SoakMin         *uint64 `cbor:"6,keyasint,omitempty"`
	Ambient         *Amount `cbor:"7,keyasint,omitempty"` // absolute
	Relieved        string  `cbor:"8,keyasint"`           // how the fluid side was relieved
	FluidPressure   Amount  `cbor:"9,keyasint"`           // and what was seen there
	Done            Time    `cbor:"10,keyasint"`
	Note            string  `cbor:"11,keyasint,omitempty"`
	Override        string  `cbor:"12,keyasint,omitempty"` // why an unlikely value is right
	Sheet           ID      `cbor:"13,keyasint,omitzero"`  // in force as far as the signer knew
	// Seen is what was noticed beside the reading, in the words of a list that may grow.
	Seen []string `cbor:"14,keyasint,omitempty"`
}

// Observation is one pressure with its temperature.
type Observation struct {
	Pressure        Amount  `cbor:"1,keyasint"`
	Temperature     Amount  `cbor:"2,keyasint"`
	TemperatureFrom string  `cbor:"3,keyasint"`
	SoakMin         *uint64 `cbor:"4,keyasint,omitempty"`
}

// Charge is servicing with gas, as found and as left.
type Charge struct {
	Unit          UnitRef     `cbor:"1,keyasint"`
	Gauge         string      `cbor:"2,keyasint"`
	AsFound       Observation `cbor:"3,keyasint"`
	AsLeft        Observation `cbor:"4,keyasint"`
	Ambient       *Amount     `cbor:"5,keyasint,omitempty"`
	Relieved      string      `cbor:"6,keyasint"`
	FluidPressure Amount      `cbor:"7,keyasint"`
	Bottle        string      `cbor:"8,keyasint"`
	Gas           string      `cbor:"9,keyasint"`
	Done          Time        `cbor:"10,keyasint"`
	Note          string      `cbor:"11,keyasint,omitempty"`
	Override      string      `cbor:"12,keyasint,omitempty"`
	Sheet         ID          `cbor:"13,keyasint,omitzero"`
	Seen          []string    `cbor:"14,keyasint,omitempty"`
}

// Correction replaces the body of a named entry; the original stays visible.
type Correction struct {
	Of     ID     `cbor:"1,keyasint"`
	Kind   Kind   `cbor:"2,keyasint"`
	Body   []byte `cbor:"3,keyasint"` // encoded, see EncodeBody
	Reason string `cbor:"4,keyasint"`
}

// Withdrawal takes an entry out of force; it stays visible.
type Withdrawal struct {
	Of     ID     `cbor:"1,keyasint"`
	Reason string `cbor:"2,keyasint"`
}

// Countersign is a second person's signature on entries.
type Countersign struct {
	Of      []ID   `cbor:"1,keyasint"`
	Meaning string `cbor:"2,keyasint"` // "inspected", "approved" or as the book's procedures say
	Note    string `cbor:"3,keyasint,omitempty"`
}

// Bottle is a gas bottle on the cart and what it held when it was last read; a later entry of the name replaces an earlier one.
type Bottle struct {
	Name        string  `cbor:"1,keyasint"`
	Volume      Amount  `cbor:"2,keyasint"` // of water
	Gas         string  `cbor:"3,keyasint"`
	Pressure    Amount  `cbor:"4,keyasint"`
	Temperature Amount  `cbor:"5,keyasint"`
	Read        Time    `cbor:"6,keyasint"`
	Rating      *Amount `cbor:"7,keyasint,omitempty"`
	Label       string  `cbor:"8,keyasint,omitempty"` // the label's words, never a colour
	Note        string  `cbor:"9,keyasint,omitempty"`
}

// Series is a row of values as they were typed: each of Values x 10^Exponent Unit.
type Series struct {
	_        struct{} `cbor:",toarray"`
	Exponent int
	Unit     string
	Values   []int64
}

// Settling holds timed readings while a charge settles: seconds since the valve was closed, and the dial at each.
type Settling struct {
	Unit        UnitRef `cbor:"1,keyasint"`
	Gauge       string  `cbor:"2,keyasint"`
	Closed      Time    `cbor:"3,keyasint"` // when the valve was closed
	Seconds     Series  `cbor:"4,keyasint"` // unit "s"
	Pressures   Series  `cbor:"5,keyasint"`
	Surrounding *Amount `cbor:"6,keyasint,omitempty"` // temperature around the unit
	Note        string  `cbor:"7,keyasint,omitempty"`
}

// Hold is a pressure-hold test: two readings of one unit by one gauge, and the fall that is allowed.
type Hold struct {
	Start    ID     `cbor:"1,keyasint"`
	End      ID     `cbor:"2,keyasint"`
	Limit    Amount `cbor:"3,keyasint"` // of pressure, corrected, over the whole test
	Document string `cbor:"4,keyasint"` // which gives the limit
	Note     string `cbor:"5,keyasint,omitempty"`
}

// Trace is a bleed-down on the fluid side: what was drawn (volume, strokes or seconds) and the pressure at each.
type Trace struct {
	Unit        UnitRef `cbor:"1,keyasint"`
	Gauge       string  `cbor:"2,keyasint"` // on the fluid side
	Drawn       Series  `cbor:"3,keyasint"` // unit "strokes", "s" or a volume
	Pressures   Series  `cbor:"4,keyasint"`
	Temperature Amount  `cbor:"5,keyasint"`
	From        string  `cbor:"6,keyasint"` // "shell", "ambient" or "unknown"
	Done        Time    `cbor:"7,keyasint"`
	Note        string  `cbor:"8,keyasint,omitempty"`
}

// Recall says that a gauge or a sheet was found wrong: for what was done since a time it no longer counts. With a Correction
// a gauge's readings since then count with that added. Nothing new may be signed with it until it is entered again.
type Recall struct {
	Gauge      string  `cbor:"1,keyasint,omitempty"` // one of the two
	Sheet      ID      `cbor:"2,keyasint,omitzero"`
	Since      Time    `cbor:"3,keyasint"`
	Correction *Amount `cbor:"4,keyasint,omitempty"`
	Reason     string  `cbor:"5,keyasint"`
}

// Snag is a defect raised on a unit, until it is cleared.
type Snag struct {
	Unit  UnitRef `cbor:"1,keyasint"`
	What  string  `cbor:"2,keyasint"`
	Found Time    `cbor:"3,keyasint"`
}

// SnagCleared says how a snag was put right.
type SnagCleared struct {
	Of   ID     `cbor:"1,keyasint"`
	How  string `cbor:"2,keyasint"`
	Done Time   `cbor:"3,keyasint"`
}

// Handover passes the work on: the one who gives states the book's fingerprint and what is open; the one who takes names that
// entry, and states the fingerprint that they hold.
type Handover struct {
	Fingerprint [32]byte `cbor:"1,keyasint"` // of the book before this entry
	Open        []string `cbor:"2,keyasint,omitempty"`
	Takes       ID       `cbor:"3,keyasint,omitzero"`
	Note        string   `cbor:"4,keyasint,omitempty"`
}

// Unknown is the body of a kind that this version does not know: verified, kept and forwarded unread.
type Unknown struct{ Raw []byte }
