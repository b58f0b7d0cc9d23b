package lan

import "example.org/chargehand/ledger/record"

// ServiceName is the name under which a network announces itself.
func ServiceName(n Network) string { return n.service }

// PeerID is a key as an announcement writes it.
func PeerID(k record.KeyID) string {
	id, err := idOf(k)
	if err != nil {
		return err.Error()
	}
	return id.String()
}
