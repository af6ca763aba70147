// Command cordwalk-cli does at the command line what Cordwalk's desktop does: it keeps a
// practice's records of neurological exams, compares visits, says where a lesion is likely,
// shows recovery, and writes the sheets. It needs no display and no C library.
//
// It supports and never replaces a licensed veterinarian.
//
// Exit codes: 0 done; 1 the data or the answer says no; 2 wrong usage.
package main

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/signal"
	"runtime/debug"
	"syscall"

	"github.com/alecthomas/kong"

	"cordwalk.example/cordwalk/assets/words"
	"cordwalk.example/cordwalk/storage"
)

// version is set by the release build.
var version = "development"

// Exit codes.
const (
	exitDone  = 0
	exitNo    = 1 // the data or the answer says no
	exitUsage = 2
)

// commands is everything that can be said on the command line.
type commands struct {
	Store        string           `help:"Folder of the practice." env:"CORDWALK_STORE" placeholder:"DIR"`
	JSON         bool             `name:"json" help:"Print JSON for programs instead of text for people."`
	KeyFile      string           `help:"File with the key that opens the practice." placeholder:"FILE"`
	PassphraseFd int              `name:"passphrase-fd" help:"Read the passphrase from this file descriptor." default:"-1" placeholder:"N"`
	Keyring      bool             `help:"Open the practice with the key in this user's system keyring, where that was chosen; see lock."`
	NoPassphrase bool             `help:"A new practice is made without protection: its key lies beside the data."`
	As           string           `help:"Who is at work: an examiner of the practice, by name or initials; the first where not said." env:"CORDWALK_AS" placeholder:"NAME"`
	PINFd        int              `name:"pin-fd" help:"Read the examiner's PIN from this file descriptor." default:"-1" placeholder:"N"`
	Lang         string           `help:"Language of what is printed and of the sheets, such as en." env:"CORDWALK_LANG" placeholder:"TAG"`
	Version      kong.VersionFlag `help:"Print the version."`

	Init     initCmd     `cmd:"" help:"Make a new practice."`
	Demo     demoCmd     `cmd:"" help:"Fill a new practice with invented animals, to try things out."`
	Patients patientsCmd `cmd:"" help:"List all patients, those who need attention first."`
	Patient  struct {
		Show  patientShowCmd  `cmd:"" help:"Show one patient."`
		Add   patientAddCmd   `cmd:"" help:"Add a patient."`
		Set   patientSetCmd   `cmd:"" help:"Change what is on file of a patient."`
		Join  patientJoinCmd  `cmd:"" help:"Say that two records are one animal."`
		Part  patientPartCmd  `cmd:"" help:"Take back that two records are one animal."`
		Erase patientEraseCmd `cmd:"" help:"Erase the owner's data of a patient because the owner asked for it."`
	} `cmd:"" help:"One patient."`
	Exam struct {
		Add         examAddCmd         `cmd:"" help:"Record an exam from a file."`
		Show        examShowCmd        `cmd:"" help:"Show a visit."`
		Close       examCloseCmd       `cmd:"" help:"Close a visit; later changes need a reason."`
		Amend       examAmendCmd       `cmd:"" help:"Change findings of a closed visit, with a reason."`
		Answer      examAnswerCmd      `cmd:"" help:"Say who was told of an alert."`
		Attach      examAttachCmd      `cmd:"" help:"Add a photo or a clip to a visit."`
		Attachments examAttachmentsCmd `cmd:"" help:"List the photos and clips of a visit."`
		Extract     examExtractCmd     `cmd:"" help:"Write a photo or a clip of a visit to a file."`
		Walk        examWalkCmd        `cmd:"" help:"List what a protocol asks of a patient today, in the order of work."`
	} `cmd:"" help:"Exams."`
	Compare  compareCmd  `cmd:"" help:"Show what changed between two visits."`
	Localise localiseCmd `cmd:"" help:"Say which segments, roots or nerves explain an exam file."`
	Progress progressCmd `cmd:"" help:"Show the course of a patient, or of a file with a series of exams."`
	Sheet    sheetCmd    `cmd:"" help:"Write the owner's progress sheet as PDF."`
	Summary  summaryCmd  `cmd:"" help:"Write the clinical summary for the veterinarian as PDF."`
	Letter   letterCmd   `cmd:"" help:"Write a referral letter about an alert as PDF."`
	Practice struct {
		Show     practiceShowCmd     `cmd:"" help:"Show what holds for all patients."`
		Set      practiceSetCmd      `cmd:"" help:"Change what holds for all patients."`
		Examiner practiceExaminerCmd `cmd:"" help:"Add an examiner, or change one: name, initials, a PIN for switching."`
	} `cmd:"" help:"The practice: its name and contact, its logo and its own wording on the sheets."`
	Export    exportCmd    `cmd:"" help:"Write records out: json, csv, xlsx, fhir or ics."`
	Import    importCmd    `cmd:"" help:"Read records in, from what export wrote."`
	Outcomes  outcomesCmd  `cmd:"" help:"Show time to walking by problem and presenting grade, beside published figures."`
	Repeat    repeatCmd    `cmd:"" help:"Show how well the practice's own repeat exams agree."`
	Conflicts conflictsCmd `cmd:"" help:"List fields with several values that nobody has chosen between."`
	Resolve   resolveCmd   `cmd:"" help:"Choose one of several values."`
	History   historyCmd   `cmd:"" help:"Show every change of a patient: who, when, on which device."`
	Audit     auditCmd     `cmd:"" help:"Show who made, amended, exported, joined or looked at what."`
	Backup    backupCmd    `cmd:"" help:"Make a backup that is read back before it counts."`
	Restore   restoreCmd   `cmd:"" help:"Make a practice out of a backup."`
	Sync      syncCmd      `cmd:"" help:"Exchange with the practice's other devices by a folder."`
	Hub       hubCmd       `cmd:"" help:"Run the hub of a clinic: a mailbox that sees sealed entries only."`
	Stim      stimCmd      `cmd:"" help:"Fit a strength–duration test of a muscle."`
	Devices   devicesCmd   `cmd:"" help:"List the practice's devices."`
	Invite    inviteCmd    `cmd:"" help:"Invite a device into the practice."`
	Join      joinCmd      `cmd:"" help:"Join a practice with a new folder on this device."`
	Admit     admitCmd     `cmd:"" help:"Let a device in whose check words are the same."`
	Remove    removeCmd    `cmd:"" help:"Take a device out of the practice."`
	Cluster   clusterCmd   `cmd:"" help:"Prepare a NATS cluster that a group of clinics runs, as a hub for all of them."`
	Extract   struct {
		Fetch extractFetchCmd `cmd:"" help:"Ask for one patient of a site whose records are not kept here, by a hub."`
		Make  extractMakeCmd  `cmd:"" help:"Write one patient to a file that only devices of the practice can read."`
		Show  extractShowCmd  `cmd:"" help:"Show what such a file holds; nothing of it is kept."`
	} `cmd:"" help:"One patient for another site of the practice: signed, sealed, to be read only."`
	Apart struct {
		List  apartListCmd  `cmd:"" help:"List what removed devices made beyond what counts of them."`
		Admit apartAdmitCmd `cmd:"" help:"Let some of it count."`
	} `cmd:"" help:"Entries of removed devices, which are kept apart."`
	Lock    lockCmd    `cmd:"" help:"Change what opens the practice."`
	Check   checkCmd   `cmd:"" help:"Read every byte of the practice and report what is wrong; repairs nothing."`
	Rebuild rebuildCmd `cmd:"" help:"Make the index anew from the journal."`
}

// env is what a command runs in.
type env struct {
	ctx    context.Context
	c      *commands
	out    io.Writer
	errOut io.Writer
	in     io.Reader
	asked  string // the examiner whose PIN was given
}

// usageError is an error of the command line, not of the data.
type usageError struct{ error }

func usage(format string, args ...any) error { return usageError{fmt.Errorf(format, args...)} }

func main() {
	storage.ChildMain()
	// Tables and courses are large and made once: collecting what is left of their making earlier
	// costs little and keeps a course of ten years under 200 MiB.
	debug.SetGCPercent(50)
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	code := run(ctx, os.Args[1:], os.Stdin, os.Stdout, os.Stderr)
	stop()
	os.Exit(code)
}

// run is main without the process: it returns the exit code.
func run(ctx context.Context, args []string, in io.Reader, out, errOut io.Writer) int {
	var c commands
	ended := -1
	tag, asked := languageOf(args)
	defer func() { _ = words.Use("en") }()
	if err := words.Use(tag); err != nil && asked {
		fmt.Fprintf(errOut, "cordwalk-cli: %s\n", err)
		return exitUsage
	}
	parser, err := kong.New(&c,
		kong.Name("cordwalk-cli"),
		kong.Description(words.T("Neurological exams of dogs and cats in rehabilitation: record, compare, localise, follow. Supports and never replaces a licensed veterinarian.")),
		kong.Vars{"version": version},
		kong.Writers(out, errOut),
		kong.Exit(func(code int) { ended = code; panic(exitNow{}) }),
		kong.ConfigureHelp(kong.HelpOptions{Compact: true, NoExpandSubcommands: true}),
		kong.UsageOnError(),
		kong.Help(printHelp),
	)
	if err != nil {
		fmt.Fprintln(errOut, "cordwalk-cli:", err)
		return exitUsage
	}
	translate(parser.Model.Node)
	var k *kong.Context
	err = func() (err error) {
		defer func() {
			if r := recover(); r != nil {
				if _, ok := r.(exitNow); !ok {
					panic(r)
				}
			}
		}()
		k, err = parser.Parse(args)
		return err
	}()
	if ended >= 0 {
		return ended
	}
	if err != nil {
		fmt.Fprintf(errOut, "cordwalk-cli: %s\n", complaint(err))
		fmt.Fprintln(errOut, words.T("Try: cordwalk-cli --help"))
		return exitUsage
	}
	err = k.Run(&env{ctx: ctx, c: &c, out: out, errOut: errOut, in: in})
	var wrong usageError
	switch {
	case err == nil:
		return exitDone
	case errors.Is(err, errSaidNo):
		return exitNo
	case errors.As(err, &wrong):
		fmt.Fprintf(errOut, "cordwalk-cli: %s\n", err)
		return exitUsage
	case errors.Is(err, context.Canceled):
		fmt.Fprintln(errOut, "cordwalk-cli: "+words.T("stopped"))
		return exitNo
	}
	fmt.Fprintf(errOut, "cordwalk-cli: %s\n", err)
	return exitNo
}

// exitNow unwinds out of kong when it has printed help or the version.
type exitNow struct{}

// errSaidNo ends a command with exit code 1 after it has said itself what is wrong.
var errSaidNo = errors.New("no")
