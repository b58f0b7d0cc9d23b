package main

import (
	"crypto/ed25519"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"

	"github.com/spf13/cobra"

	"example.org/chargehand/ledger/keys"
)

// openKey unlocks this laptop's key, and warns where other users of the laptop can read its file.
func openKey(cmd *cobra.Command, dir string, passphrase []byte) (ed25519.PrivateKey, error) {
	path := filepath.Join(dir, "key")
	key, err := keys.Open(path, passphrase)
	switch {
	case errors.Is(err, keys.ErrPassphrase):
		return nil, couldNot(err, "Type it again; nothing was signed")
	case errors.Is(err, keys.ErrMalformed):
		return nil, couldNot(fmt.Errorf("the key file %q is damaged", path), "Restore the file key from a backup of this folder, or join again in a new folder; nothing was signed")
	case err != nil:
		return nil, couldNot(fmt.Errorf("the key cannot be read: %w", plainly(err)), "Restore the file key from a backup of this folder, or see that you may read it; nothing was signed")
	}
	if info, err := os.Stat(path); err == nil && runtime.GOOS != "windows" && info.Mode().Perm()&0o077 != 0 {
		fmt.Fprintf(cmd.ErrOrStderr(), "chargehand: the key file %q may be read by others (mode %04o). Take that away: chmod 600 %q.\n", path, info.Mode().Perm(), path)
	}
	return key, nil
}
