package view

import (
	"cordwalk.example/cordwalk/assets/words"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"maps"
	"os"
	"path/filepath"
	"time"

	"cordwalk.example/cordwalk/exam"
)

// Settings is what one person on one machine chose. It holds nothing of any animal but
// ids, and lies in the user's configuration folder, outside the store.
type Settings struct {
	Store     string            `json:"store,omitempty"`     // folder of the practice last opened
	Examiner  string            `json:"examiner,omitempty"`  // who examined last
	Language  string            `json:"language,omitempty"`  // BCP 47 tag of the screens
	Theme     string            `json:"theme,omitempty"`     // "light", "dark", "contrast", or empty: as the system
	TextScale int               `json:"textScale,omitempty"` // percent, 80 to 200; 0 is 100
	Width     int               `json:"width,omitempty"`     // of the window, in points
	Height    int               `json:"height,omitempty"`
	Route     string            `json:"route,omitempty"`     // what was shown last
	Resume    map[string]string `json:"resume,omitempty"`    // visit id → cell in focus
	Posture   map[string]string `json:"posture,omitempty"`   // patient id → how it is held
	OneByOne  bool              `json:"oneByOne,omitempty"`  // the exam shows a single test
	Protocol  string            `json:"protocol,omitempty"`  // used last
	Exchange  string            `json:"exchange,omitempty"`  // folder by which devices exchange
	Hub       string            `json:"hub,omitempty"`       // address of the hub in the network
	Backups   string            `json:"backups,omitempty"`   // folder of the backups
	ByHand    bool              `json:"byHand,omitempty"`    // backups are made when asked for, not once a day by themselves
	LockAfter int               `json:"lockAfter,omitempty"` // minutes without use until a protected practice is locked; 0 is LockUsual, below 0 never
	Token     map[string]string `json:"token,omitempty"`     // store id → proof that the store was not copied
}

// LockUsual is after how many minutes without use a protected practice is locked unless somebody chose otherwise
// (common practice).
const LockUsual = 15

// Idle returns after how long without use a protected practice is locked, 0 for never.
func (s Settings) Idle() time.Duration {
	switch {
	case s.LockAfter < 0:
		return 0
	case s.LockAfter == 0:
		return LockUsual * time.Minute
	}
	return time.Duration(s.LockAfter) * time.Minute
}

// resumeMax bounds how many half-done exams are remembered.
const resumeMax = 200

// SettingsPath returns the file of the settings in the user's configuration folder.
func SettingsPath() (string, error) {
	dir, err := os.UserConfigDir()
	if err != nil {
		return "", fmt.Errorf("%s: %w", words.T("this system names no folder for settings"), err)
	}
	return filepath.Join(dir, "cordwalk", "settings.json"), nil
}

// LoadSettings reads the settings. A missing file is the zero Settings; a damaged one is
// too, and is returned with the error that says so.
func LoadSettings(path string) (Settings, error) {
	data, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return Settings{}, nil
	}
	if err != nil {
		return Settings{}, fmt.Errorf("%s: %w", words.T("reading the settings"), err)
	}
	var s Settings
	if err := json.Unmarshal(data, &s); err != nil {
		return Settings{}, fmt.Errorf("%s: %w", words.T("the settings in %s cannot be read and start anew", path), err)
	}
	if s.TextScale != 0 {
		s.TextScale = max(80, min(200, s.TextScale))
	}
	return s, nil
}

// Save writes the settings beside their place and renames them there, so that a crash
// leaves the old ones.
func (s Settings) Save(path string) error {
	if err := os.MkdirAll(filepath.Dir(path), 0o700); err != nil {
		return fmt.Errorf("%s: %w", words.T("keeping the settings"), err)
	}
	data, err := json.MarshalIndent(s, "", "  ")
	if err != nil {
		return fmt.Errorf("%s: %w", words.T("keeping the settings"), err)
	}
	f, err := os.CreateTemp(filepath.Dir(path), "settings-*.tmp")
	if err != nil {
		return fmt.Errorf("%s: %w", words.T("keeping the settings"), err)
	}
	defer os.Remove(f.Name())
	if _, err = f.Write(data); err == nil {
		err = f.Sync()
	}
	if cerr := f.Close(); err == nil {
		err = cerr
	}
	if err == nil {
		err = os.Rename(f.Name(), path)
	}
	if err != nil {
		return fmt.Errorf("%s: %w", words.T("keeping the settings"), err)
	}
	return nil
}

// KeepResume remembers the cell in focus of a half-done exam; the zero Key forgets it.
func (s *Settings) KeepResume(visit exam.ID, k exam.Key) {
	m := maps.Clone(s.Resume)
	if m == nil {
		m = map[string]string{}
	}
	delete(m, visit.String())
	if k != (exam.Key{}) {
		for old := range m {
			if len(m) < resumeMax {
				break
			}
			delete(m, old)
		}
		m[visit.String()] = k.String()
	}
	s.Resume = m
}

// ResumeAt returns the cell to go on at, the zero Key where none is remembered.
func (s Settings) ResumeAt(visit exam.ID) exam.Key {
	k, err := exam.ParseKey(s.Resume[visit.String()])
	if err != nil {
		return exam.Key{}
	}
	return k
}
