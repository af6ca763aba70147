package main

import (
	"errors"
	"os"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/storage"
	"cordwalk.example/cordwalk/sync/key"
	"cordwalk.example/cordwalk/sync/keyring"
)

// lockCmd changes what opens a practice on this device.
type lockCmd struct {
	NewPassphraseFd int    `name:"new-passphrase-fd" help:"Read the passphrase that opens it from now on from this file descriptor." default:"-1" placeholder:"N"`
	NewKeyFile      string `help:"File with the key that opens it from now on; made if it is not there." placeholder:"FILE"`
	AlsoKeyring     bool   `help:"The system keyring of this user opens it as well, see --keyring."`
}

func (c *lockCmd) Run(e *env) error {
	if c.NewPassphraseFd < 0 && c.NewKeyFile == "" {
		return usage("%s", words.T("say what opens the practice from now on: --new-passphrase-fd N or --new-key-file FILE, and --also-keyring if wanted"))
	}
	return e.change(func(s *storage.Store) error {
		var openers []key.Opener
		if c.NewPassphraseFd >= 0 {
			f := os.NewFile(uintptr(c.NewPassphraseFd), "passphrase")
			if f == nil {
				return usage("%s", words.T("file descriptor %d is not open", c.NewPassphraseFd))
			}
			pass, err := readPassphrase(f)
			if err != nil {
				return err
			}
			openers = append(openers, key.Passphrase(pass))
		}
		if c.NewKeyFile != "" {
			o, err := storage.KeyFile(c.NewKeyFile)
			if err != nil {
				return err
			}
			openers = append(openers, o)
		}
		practice := s.Bag().Practice
		if c.AlsoKeyring {
			fresh := key.NewSecret()
			if err := keyring.Set(e.ctx, practice, fresh); err != nil {
				return err
			}
			openers = append(openers, key.Keyring(fresh))
		}
		if err := s.Relock(openers...); err != nil {
			if c.AlsoKeyring {
				err = errors.Join(err, keyring.Delete(e.ctx, practice))
			}
			return err
		}
		e.say("%s", words.T("From now on the practice opens with what was named, and with nothing else."))
		return nil
	})
}
