package view

import (
	"errors"
	"strings"
	"testing"

	"cordwalk.example/cordwalk/exam"
)

// The strings come from the tests of the reference implementation of Argon2 (P-H-C/phc-winner-argon2, test.c).
func TestPINsAreReadAsTheReferenceWritesThem(t *testing.T) {
	for kept, pin := range map[string]string{
		"$argon2id$v=19$m=65536,t=2,p=1$c29tZXNhbHQ$CTFhFdXPJO1aFaMaO6Mm5c8y7cJHAph8ArZWb2GRPPc": "password",
		"$argon2id$v=19$m=256,t=2,p=1$c29tZXNhbHQ$nf65EOgLrQMR/uIPnA4rEsF5h7TKyQwu9U1bMCHGi/4":   "password",
		"$argon2id$v=19$m=65536,t=2,p=1$c29tZXNhbHQ$C4TWUs9rDEvq7w3+J4umqA32aWKB1+DSiRuBfYxFj94": "differentpassword",
		"$argon2id$v=19$m=65536,t=2,p=1$ZGlmZnNhbHQ$vfMrBczELrFdWP0ZsfhWsRPaHppYdP3MVEMIVlqoFBw": "password",
	} {
		e := exam.Examiner{Name: "A", PINHash: strings.TrimSpace(kept)}
		if err := PINFits(e, pin); err != nil {
			t.Errorf("%s: %v", kept, err)
		}
		if err := PINFits(e, pin+"1"); !errors.Is(err, ErrNotTheirPIN) {
			t.Errorf("%s took another: %v", kept, err)
		}
	}
}

func TestPINsAreKeptSaltedAndChecked(t *testing.T) {
	one, err := HashPIN("4711")
	if err != nil {
		t.Fatal(err)
	}
	two, err := HashPIN("4711")
	if err != nil {
		t.Fatal(err)
	}
	if one == two || strings.Contains(one, "4711") {
		t.Errorf("the same PIN is kept as %q and %q", one, two)
	}
	e := exam.Examiner{Name: "A. Moor", PINHash: one}
	if err := PINFits(e, "4711"); err != nil {
		t.Error(err)
	}
	for _, wrong := range []string{"", "4712", "04711"} {
		if err := PINFits(e, wrong); !errors.Is(err, ErrNotTheirPIN) {
			t.Errorf("%q: %v", wrong, err)
		}
	}
	if err := PINFits(exam.Examiner{Name: "T"}, ""); err != nil {
		t.Errorf("without a PIN: %v", err)
	}
	for _, bad := range []string{"", "123", "1234567890123", "12a4", "12 34", "١٢٣٤"} {
		if _, err := HashPIN(bad); err == nil {
			t.Errorf("%q was taken as a PIN", bad)
		}
	}
}

// What came from another device must not make this one work for minutes.
func TestPINsThatAskForTooMuchAreRefused(t *testing.T) {
	for _, kept := range []string{
		"x", "$argon2id$v=19$m=4194304,t=1,p=1$c29tZXNhbHQ$CTFhFdXPJO1aFaMaO6Mm5c8y7cJHAph8ArZWb2GRPPc",
		"$argon2id$v=19$m=65536,t=4000000,p=1$c29tZXNhbHQ$CTFhFdXPJO1aFaMaO6Mm5c8y7cJHAph8ArZWb2GRPPc",
		"$argon2id$v=19$m=65536,t=0,p=1$c29tZXNhbHQ$CTFhFdXPJO1aFaMaO6Mm5c8y7cJHAph8ArZWb2GRPPc",
		"$argon2id$v=19$m=65536,t=2,p=0$c29tZXNhbHQ$CTFhFdXPJO1aFaMaO6Mm5c8y7cJHAph8ArZWb2GRPPc",
		"$argon2i$v=19$m=65536,t=2,p=1$c29tZXNhbHQ$wWKIMhR9lyDFvRz9YTZweHKfbftvj+qf+YFY4NeBbtA",
		"$argon2id$v=19$m=65536,t=2,p=1$$", "$argon2id$v=19$m=65536,t=2,p=1 $c29tZXNhbHQ$CTFhFdXPJO1aFaMaO6Mm5c8y7cJHAph8ArZWb2GRPPc",
	} {
		err := PINFits(exam.Examiner{PINHash: kept}, "1234")
		if err == nil || errors.Is(err, ErrNotTheirPIN) {
			t.Errorf("%q: %v", kept, err)
		}
	}
}

func TestExaminersAreFoundByNameAndInitials(t *testing.T) {
	p := exam.Practice{Examiners: []exam.Examiner{{Name: "Ana Moor", Initials: "AM"}, {Name: "Alf Mohr", Initials: "AM"}, {Name: "Tove Lind", Initials: "TL"}}}
	for called, want := range map[string]string{"ana moor": "Ana Moor", " tl ": "Tove Lind", "AM": "", "nobody": "", "": ""} {
		e, ok := FindExaminer(p, called)
		if ok != (want != "") || e.Name != want {
			t.Errorf("%q finds %q, %v", called, e.Name, ok)
		}
	}
}
