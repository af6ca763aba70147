package sheet

import (
	"errors"
	"fmt"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"time"
	"unicode/utf8"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/exam"
	"cordwalk.example/cordwalk/exam/progress/repeat"
	"cordwalk.example/cordwalk/exam/scale"
)

// Phrases that a practice may put in its own words. The English text is the key; the
// places for names and days must stay.
const (
	phraseWalksAlone = "Today %s walked ten steps or more alone."
	phraseWalksHeld  = "Today %s took steps only when held up."
	phraseNoSteps    = "Today %s could not take useful steps, even when held up."
	phraseBetter     = "Better than on %[1]s: %[2]s."
	phraseWeaker     = "Weaker than on %[1]s: %[2]s."
	phraseSame       = "We saw no clear change since %s."
	phraseFirst      = "This was the first visit. The next one will show what changes."
	phraseMissed     = "We did not test this today: %s."
	phraseUnlike     = "The test was not done in the same way as last time, so take the change with care."
	phraseMaybe      = "A little better in the tests than on %[1]s: %[2]s. We will see if it lasts."
	phraseGained     = "Since the first visit on %[1]s, %[2]s has grown stronger."
	phraseLost       = "Since the first visit on %[1]s, %[2]s has grown weaker."
	phraseKept       = "Since the first visit on %[1]s, %[2]s has stayed about the same."
	phraseUnsure     = "It is too soon to say where this will lead."
	phraseKeepOn     = "Please keep up the home plan."
	phraseNoHome     = "There are no home exercises for now."
)

// Texts of the owner's sheet that stay as they are: headings, and what keeps an animal safe.
const (
	textTitle       = "How %s is doing"
	textSeen        = "Seen on %s"
	textSeenBy      = "Seen on %[1]s by %[2]s"
	textShort       = "In short"
	textChanges     = "What we saw"
	textLegs        = "The legs, last time and now"
	textCourse      = "The way so far"
	textGoals       = "Goals"
	textGoalBy      = "%[1]s, by %[2]s"
	textGoalReached = "%s – reached"
	textHome        = "Home plan"
	textTick        = "Tick a box each time it is done."
	textStop        = "Stop if: %s"
	textTimes       = "%d times a day"
	textOnce        = "once a day"
	textDays        = "%d days a week"
	textNextVisit   = "Next visit"
	textNoNext      = "not set yet"
	textCall        = "Call the vet at once if"
	textPhoneVet    = "Your vet"
	textPhoneNight  = "Nights and Sundays"
	textMedicine    = "Give no medicine your veterinarian did not prescribe. Never give human painkillers."
	textSupport     = "This sheet helps you at home. It does not take the place of your veterinarian."
	textNowBox      = "Call your vet now"
	textTodayBox    = "Call your vet today"
	textUntilAgrees = "No exercises until your veterinarian agrees."
	textTellLimb    = "weaker than on %s: tell your veterinarian before more exercise"
	textTellOther   = "worse than on %s: tell your veterinarian before more exercise"
	textBetterThan  = "better than on %s"
	textSameAs      = "the same as on %s"
	textNotTested   = "not tested today"
	textFirstTest   = "tested for the first time"
	textDemo        = "Demo – an invented animal"
	textMore        = "and %d more"
	textRest        = "Rest until %s."
	textLegend      = "A full circle is a leg of full strength. A broken circle was not tested."

	wordBetter   = "better"
	wordSame     = "the same"
	wordWeaker   = "weaker"
	wordNoTest   = "not tested"
	wordFirst    = "first test"
	wordStrong   = "strong"
	wordNoMove   = "no movement"
	wordAlone    = "alone"
	wordCannot   = "cannot"
	wordSurgery  = "surgery"
	wordOnset    = "first signs"
	wordWalking  = "walking"
	wordTail     = "tail"
	wordBladder  = "passing urine"
	wordBowel    = "holding stool"
	wordPain     = "neck and back pain"
	wordLeftFore = "left front leg"
	wordRghtFore = "right front leg"
	wordLeftHind = "left back leg"
	wordRghtHind = "right back leg"
	wordAllLegs  = "all four legs"
	wordForeLegs = "both front legs"
	wordHindLegs = "both back legs"
)

// callSigns are what an owner can see that must not wait, from the red flags of the
// progression reference (section 3: sudden loss of walking, breathing, bladder, pain,
// fits, dullness, cold limbs, wounds, choking, self-trauma). Twelve hours without urine is
// common practice.
var callSigns = []string{
	"the legs get weaker, or your pet can no longer walk or stand",
	"a leg or the tail no longer feels a touch it felt before",
	"breathing is hard, fast or shallow, or the gums are blue or pale",
	"no urine for 12 hours, or urine drips and the belly is tight",
	"there is strong pain: crying out, shaking, a stiff neck or back",
	"your pet has a fit, falls to one side, or is hard to wake",
	"the back legs are cold and hurt",
	"a wound opens, swells or leaks, or there is an open sore",
	"your pet will not eat, feels hot, chokes or coughs",
	"your pet bites or chews its own leg or tail",
}

// bank lists the phrases that a practice may reword, by the short names under which its
// wording is kept. Names stay when an English text is mended.
var bank = []banked{
	{"walks-alone", phraseWalksAlone, placeAnimal}, {"walks-held", phraseWalksHeld, placeAnimal}, {"no-steps", phraseNoSteps, placeAnimal},
	{"better", phraseBetter, placeDay + placeParts}, {"weaker", phraseWeaker, placeDay + placeParts}, {"same", phraseSame, placeDay}, {"first", phraseFirst, ""},
	{"missed", phraseMissed, placeParts}, {"unlike", phraseUnlike, ""}, {"maybe", phraseMaybe, placeDay + placeParts}, {"gained", phraseGained, placeDay + placeAnimal},
	{"lost", phraseLost, placeDay + placeAnimal}, {"kept", phraseKept, placeDay + placeAnimal}, {"unsure", phraseUnsure, ""}, {"keep-on", phraseKeepOn, ""}, {"no-home", phraseNoHome, ""},
}

// banked is a phrase of the bank: its short name, its English text, and what its places are for, in
// their order.
type banked struct{ key, text, places string }

// What is filled into a phrase.
const (
	placeAnimal = "a" // the animal's name
	placeDay    = "d" // the day it is compared with
	placeParts  = "p" // legs and other topics
)

// placeName is how a place is shown to people who reword a phrase, in the language in use.
func placeName(place rune) string {
	switch string(place) {
	case placeAnimal:
		return "‹" + words.T("animal") + "›"
	case placeDay:
		return "‹" + words.T("day") + "›"
	}
	return "‹" + words.T("parts") + "›"
}

// inBank finds a phrase by its short name.
func inBank(key string) (banked, bool) {
	i := slices.IndexFunc(bank, func(b banked) bool { return b.key == key })
	if i < 0 {
		return banked{}, false
	}
	return bank[i], true
}

// Marked writes a phrase for people to reword: its places as words in angle quotes, in the
// language in use, such as «Today ‹animal› took steps only when held up.»
func Marked(key, text string) string {
	b, ok := inBank(key)
	if !ok {
		return text
	}
	n := 0
	return placeMark.ReplaceAllStringFunc(text, func(m string) string {
		n++
		if x := placeMark.FindStringSubmatch(m)[2]; x != "" {
			n, _ = strconv.Atoi(x)
		}
		if n < 1 || n > len(b.places) {
			return m
		}
		return placeName(rune(b.places[n-1]))
	})
}

// Unmarked is the inverse of Marked. The error says which places are missing or stand twice.
func Unmarked(key, text string) (string, error) {
	b, ok := inBank(key)
	if !ok {
		return "", noPhrase(key)
	}
	if strings.Contains(text, "%") {
		return "", errors.New(words.T("leave the percent sign out: an owner's sheet holds no shares"))
	}
	for i, place := range b.places {
		name := placeName(place)
		if n := strings.Count(text, name); n != 1 {
			return "", errors.New(words.T("keep %s, once: it is filled in on each sheet", name))
		}
		text = strings.Replace(text, name, fmt.Sprintf("%%[%d]s", i+1), 1)
	}
	return text, CheckPhrase(key, text)
}

// Example fills a phrase in with an invented animal, as it would stand on a sheet in a language.
func Example(lang, key, text string) string {
	b, ok := inBank(key)
	if !ok || CheckPhrase(key, text) != nil {
		return ""
	}
	args := make([]any, len(b.places))
	for i, place := range b.places {
		switch string(place) {
		case placeAnimal:
			args[i] = "Bruno"
		case placeDay:
			args[i] = dayWords(lang, time.Date(2026, time.March, 2, 0, 0, 0, 0, time.UTC))
		default:
			args[i] = words.OfIn(lang, wordHindLegs)
		}
	}
	return fmt.Sprintf(text, args...)
}

// editable lists the phrases of the bank.
var editable = []string{phraseWalksAlone, phraseWalksHeld, phraseNoSteps, phraseBetter, phraseWeaker, phraseSame,
	phraseFirst, phraseMissed, phraseUnlike, phraseMaybe, phraseGained, phraseLost, phraseKept, phraseUnsure, phraseKeepOn, phraseNoHome}

var fixedTexts = []string{textTitle, textSeen, textSeenBy, textShort, textChanges, textLegs, textCourse, textGoals, textGoalBy,
	textGoalReached, textHome, textTick, textStop, textTimes, textOnce, textDays, textNextVisit, textNoNext, textCall,
	textPhoneVet, textPhoneNight, textMedicine, textSupport, textNowBox, textTodayBox, textUntilAgrees, textTellLimb, textTellOther,
	textBetterThan, textSameAs, textNotTested, textFirstTest, textDemo, textMore, textRest, textLegend,
	wordBetter, wordSame, wordWeaker, wordNoTest, wordFirst, wordStrong, wordNoMove, wordAlone, wordCannot, wordSurgery, wordOnset,
	wordWalking, wordTail, wordBladder, wordBowel, wordPain, wordLeftFore, wordRghtFore, wordLeftHind, wordRghtHind, wordAllLegs, wordForeLegs, wordHindLegs}

// BankPhrase is a sentence that a practice may put in its own words.
type BankPhrase struct {
	Key      string // its short name
	English  string // the text in English
	Standard string // the text in the language that was asked for
	Own      string // the practice's wording in that language, empty where it has none
}

// Phrases lists the sentences that a practice may put in its own words, with its wording in
// a language.
func Phrases(pr exam.Practice, lang string) []BankPhrase {
	own := OwnPhrases(pr, lang)
	out := make([]BankPhrase, len(bank))
	for i, b := range bank {
		out[i] = BankPhrase{b.key, b.text, words.OfIn(lang, b.text), own[b.key]}
	}
	return out
}

// OwnPhrases returns the practice's own wording in a language by short name, as Options take it.
func OwnPhrases(pr exam.Practice, lang string) map[string]string {
	out := map[string]string{}
	for _, p := range pr.Phrases {
		if baseTag(p.Language) == baseTag(lang) {
			out[p.Key] = p.Words
		}
	}
	return out
}

// SetPhrase returns the practice with a sentence in its own words in a language; empty words
// go back to the standard text.
func SetPhrase(pr exam.Practice, key, lang, own string) (exam.Practice, error) {
	own = strings.TrimSpace(own)
	if own != "" {
		if err := CheckPhrase(key, own); err != nil {
			return pr, err
		}
	} else if _, ok := inBank(key); !ok {
		return pr, noPhrase(key)
	}
	lang = baseTag(lang)
	pr.Phrases = slices.DeleteFunc(slices.Clone(pr.Phrases), func(p exam.Phrase) bool { return p.Key == key && p.Language == lang })
	if own != "" {
		pr.Phrases = append(pr.Phrases, exam.Phrase{Key: key, Language: lang, Words: own})
	}
	return pr, nil
}

// baseTag is the language of a BCP 47 tag without its region; English where none is said.
func baseTag(tag string) string {
	b, _, _ := strings.Cut(strings.ToLower(strings.ReplaceAll(tag, "_", "-")), "-")
	if b == "" {
		return "en"
	}
	return b
}

// Terms lists every text of the papers that stands in a table, in English, for the
// catalogue of texts.
func Terms() []string {
	out := slices.Concat(editable, fixedTexts, callSigns)
	open := func(s string) string { return strings.ReplaceAll(s, "-", " ") }
	for _, i := range exam.Items() {
		out = append(out, upperFirst(open(i.String())))
		out = append(out, i.Info().Grades...)
		for _, s := range i.Info().Sites {
			out = append(out, open(s.String()))
		}
	}
	for _, m := range exam.Measures() {
		out = append(out, upperFirst(open(m.String())))
	}
	for _, p := range exam.Precautions() {
		out = append(out, open(p.String()))
	}
	for _, k := range exam.TreatmentKinds() {
		out = append(out, k.Name)
	}
	for _, k := range exam.ExerciseKinds() {
		out = append(out, k.Name, k.How, k.Amount, k.Stop)
	}
	for _, s := range scale.Scales() {
		out = append(out, s.Info().Name)
	}
	for v := repeat.Verdict(0); v <= repeat.Likely; v++ {
		out = append(out, v.String())
	}
	for _, c := range exam.Conditions() {
		out = append(out, c.String())
	}
	out = append(out, sayKeys()...)
	return append(out, KindSheet, KindSummary, KindLetter, "medial", "lateral", "flexion", "extension")
}

// maxPhrase is the most letters of a practice's own wording: what still fits beside the picture.
const maxPhrase = 300

// CheckPhrase returns an error if a practice's own wording cannot stand for the phrase of a
// short name: the places for names, days and lists must be the same.
func CheckPhrase(key, own string) error {
	b, ok := inBank(key)
	if !ok {
		return noPhrase(key)
	}
	if !slices.Equal(places(own), places(b.text)) {
		return fmt.Errorf("the wording %.80q does not keep the places of %q: use the same marks that begin with %%", own, b.text)
	}
	if n := utf8.RuneCountInString(own); n > maxPhrase {
		return errors.New(words.T("the wording has %d letters; at most %d fit on a sheet", n, maxPhrase))
	}
	return nil
}

func noPhrase(key string) error {
	names := make([]string, len(bank))
	for i, b := range bank {
		names[i] = b.key
	}
	return fmt.Errorf("there is no phrase %.40q to reword; the phrases are %s", key, strings.Join(names, ", "))
}

var placeMark = regexp.MustCompile(`%(\[(\d)\])?(.?)`)

// places returns what is filled into a text, in order of the numbers: "1s", "2s". Marks that
// are no places are kept as they are, so that they never equal those of a phrase.
func places(s string) []string {
	var out []string
	n := 0
	for _, m := range placeMark.FindAllStringSubmatch(s, -1) {
		n++
		if m[2] != "" {
			n, _ = strconv.Atoi(m[2])
		}
		out = append(out, strconv.Itoa(n)+m[3])
	}
	slices.Sort(out)
	return out
}

// text writes a text of the tables above in the paper's language, or the practice's own
// wording of it.
func (in Input) text(key string, args ...any) string {
	t := words.OfIn(in.lang(), key)
	for _, b := range bank {
		if b.text != key {
			continue
		}
		if own := in.Options.Phrases[b.key]; strings.TrimSpace(own) != "" && CheckPhrase(b.key, own) == nil {
			t = own
		}
	}
	if len(args) == 0 {
		return t
	}
	return fmt.Sprintf(t, args...)
}
