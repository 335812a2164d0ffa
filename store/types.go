package store

import (
	"database/sql"
	"errors"
	"time"

	"evenshelf/engine/audio"
	"evenshelf/engine/level"
	"evenshelf/engine/profile"
)

// Tx and DB let other rooms hand transactions around without importing SQL themselves.
type (
	Tx = sql.Tx
	DB = sql.DB
)

var (
	// ErrNotFound is wrapped by every look-up that finds nothing.
	ErrNotFound = errors.New("not found")
	// ErrExists is wrapped when a name or path is taken.
	ErrExists = errors.New("already exists")
	// ErrState is wrapped when a change does not fit the state a run or job is in.
	ErrState = errors.New("not possible in this state")
)

// Shelf is a folder tree of recordings that the operator has registered.
type Shelf struct {
	ID        int64     `json:"id"`
	Name      string    `json:"name"`   // a-z, 0-9 and -, unique
	Root      string    `json:"root"`   // absolute, symbolic links resolved
	Copies    string    `json:"copies"` // absolute folder that delivered copies go to; never inside Root
	CreatedAt time.Time `json:"created_at"`
}

// UploadShelf is the name of the shelf that uploads go to.
const UploadShelf = "uploads"

// Attic is where originals are kept that a delivery replaced: a folder beside Copies.
func (sh Shelf) Attic() string { return sh.Copies + ".attic" }

// Original is a recording that is kept in the attic since its levelled copy took its place.
type Original struct {
	RecordingID int64     `json:"recording_id"`
	ShelfID     int64     `json:"shelf_id"`
	RunID       int64     `json:"run_id"`
	JobID       int64     `json:"job_id"`
	Path        string    `json:"path"` // of the recording, relative to the shelf's root
	KeptAt      time.Time `json:"kept_at"`
	SHA256      string    `json:"sha256"` // of the original
	Stored      string    `json:"-"`      // where it is, relative to the attic
	Levelled    string    `json:"-"`      // SHA-256 of the file that took its place
	Size        int64     `json:"-"`      // of the file that took its place, bytes
	Length      int64     `json:"-"`      // of the original, bytes; 0 if that was not noted
	Modified    time.Time `json:"-"`      // of the file that took its place; only KeepOriginal takes it, zero: the time of the one before
}

// AtticCount is how much the attic has.
type AtticCount struct {
	Originals int   // that can be brought back
	Versions  int   // other files
	Bytes     int64 // of all; about, where an older version noted no length
}

// Version is what the attic keeps of a recording beside the original that is brought back.
type Version struct {
	RecordingID int64     `json:"recording_id"`
	ShelfID     int64     `json:"shelf_id"`
	RunID       int64     `json:"run_id"` // that took its place
	Path        string    `json:"path"`   // of the recording, relative to the shelf's root
	KeptAt      time.Time `json:"kept_at"`
	SHA256      string    `json:"sha256"`
	File        string    `json:"file"`    // where it is, an absolute path
	Earlier     bool      `json:"earlier"` // an original of an earlier file in the recording's place; else one with other tags
}

// KeptBy says for which run the attic has originals.
type KeptBy struct {
	RunID     int64 `json:"run_id"`
	Originals int   `json:"originals"`
}

// OriginalQuery selects a page of the attic, in order of the recordings' ids.
type OriginalQuery struct {
	ShelfID     int64 // 0 = all
	RunID       int64 // 0 = all; else those that run replaced last
	RecordingID int64 // 0 = all; only Versions asks
	After       int64 // recording id of the last one of the page before
	Limit       int   // 1 … 1000, 0 = 100
}

// ShelfSummary is a shelf with what is known about its recordings, those missing from the disk left out.
type ShelfSummary struct {
	Shelf
	Recordings    int      `json:"recordings"`
	Duration      float64  `json:"duration_s"` // of the recordings measured so far
	Measured      int      `json:"measured"`   // have a before reading
	Done          int      `json:"done"`       // latest levelling ended done
	Held          int      `json:"held"`
	Failed        int      `json:"failed"`
	Quietest      *float64 `json:"quietest_lufs"` // of the before readings
	Loudest       *float64 `json:"loudest_lufs"`
	QuietestAfter *float64 `json:"quietest_after_lufs"` // of the after readings of recordings that are done
	LoudestAfter  *float64 `json:"loudest_after_lufs"`
	HighestPeak   *float64 `json:"highest_peak_after_dbtp"`
	LastRun       *Run     `json:"last_run"`
}

// FoundFile is one media file that a scan came across.
type FoundFile struct {
	Path       string // relative to the shelf's root, with forward slashes
	Size       int64
	ModifiedAt time.Time
	Inode      uint64 // 0 if not known
}

// ScanResult says what a scan changed.
type ScanResult struct {
	Found   int `json:"found"`
	Added   int `json:"added"`
	Changed int `json:"changed"` // size or time differs: readings are out of date
	Moved   int `json:"moved"`   // known under another path, which is no longer there
	Missing int `json:"missing"` // were known, are no longer there
	// Unread names the folders that could not be looked into; what is known below them was left as it is.
	Unread []string `json:"unread,omitempty"`
}

// Figures are the numbers of one reading that lists and charts need. nil = not defined.
type Figures struct {
	Integrated  *float64 `json:"integrated_lufs"`
	Range       *float64 `json:"loudness_range_lu"`
	TruePeak    *float64 `json:"true_peak_dbtp"`
	ShortTerm10 *float64 `json:"short_term_p10_lufs"`
	ShortTerm95 *float64 `json:"short_term_p95_lufs"`
}

// Recording is one media file on a shelf with its latest figures.
type Recording struct {
	ID         int64     `json:"id"`
	ShelfID    int64     `json:"shelf_id"`
	ShelfName  string    `json:"shelf"`
	Path       string    `json:"path"` // relative to the shelf's root
	Size       int64     `json:"size_bytes"`
	ModifiedAt time.Time `json:"modified_at"`
	AddedAt    time.Time `json:"added_at"`
	Missing    bool      `json:"missing"`
	Format     string    `json:"format"`     // "" until measured
	Duration   *float64  `json:"duration_s"` // nil until measured
	State      JobState  `json:"state"`      // of the latest job; "" if none concerns the file as it is now
	Reason     string    `json:"reason"`
	Faults     int       `json:"faults"`
	Profile    string    `json:"profile"` // of the latest levelling
	Before     *Figures  `json:"before"`
	After      *Figures  `json:"after"`
	JobID      int64     `json:"job_id"` // latest job, 0 if none
}

// RecordingQuery selects a page of recordings.
type RecordingQuery struct {
	ShelfID int64    // 0 = all shelves
	RunID   int64    // 0 = any; else only recordings that run took
	Folder  string   // path prefix, "" = all
	State   JobState // "" = all; "never" = no job yet
	Search  string   // substring of the path, any case
	Sort    string   // path (default), added, state, duration, before, after (LUFS), range, peak (of the before reading)
	Desc    bool
	Limit   int    // 1 … 1000, 0 = 100
	Cursor  string // from the page before, "" = first
}

// RecordingPage is one page; Next is "" on the last. Total counts all that match.
type RecordingPage struct {
	Recordings []Recording `json:"recordings"`
	Next       string      `json:"next"`
	Total      int         `json:"total"`
}

// Spine is one upright bar of the spine chart.
type Spine struct {
	ID     int64
	Path   string
	State  JobState
	Before *Figures
	After  *Figures
}

// JobState is a recording's turn in the queue.
type JobState string

// The states of a job.
const (
	Waiting   JobState = "waiting"
	Working   JobState = "working"
	Done      JobState = "done"
	Held      JobState = "held"
	Failed    JobState = "failed"
	Cancelled JobState = "cancelled"
)

// Delivery is where a result goes.
type Delivery string

// The deliveries known so far.
const (
	Measure Delivery = "measure" // nothing is written
	Copy    Delivery = "copy"    // a mirrored tree under the shelf's Copies folder
	Replace Delivery = "replace" // the copy takes the original's place; the original moves to the attic
	Tags    Delivery = "tags"    // gain tags are written into the file itself, on the way of Replace
)

// Deliveries are all of them.
var Deliveries = []Delivery{Measure, Copy, Replace, Tags}

// Writes reports whether a delivery changes files on the shelf.
func (d Delivery) Writes() bool { return d == Replace || d == Tags }

// Levels reports whether a delivery levels; the others leave the sound, and what is known of its levelling, as it is.
func (d Delivery) Levels() bool { return d == Copy || d == Replace }

// NewRun asks for work on recordings: all of a shelf, a folder of it, or a list.
type NewRun struct {
	ShelfID    int64
	Folder     string  // "" = the whole shelf
	Recordings []int64 // nil = all under Folder
	Profile    profile.Profile
	Delivery   Delivery
}

// RunState is derived from a run's jobs: waiting, working, finished or cancelled.
type RunState string

// The states of a run.
const (
	RunWaiting   RunState = "waiting"
	RunWorking   RunState = "working"
	RunFinished  RunState = "finished"
	RunCancelled RunState = "cancelled"
)

// Run is one request to work on many recordings, with its progress.
type Run struct {
	ID             int64      `json:"id"`
	ShelfID        int64      `json:"shelf_id"`
	ShelfName      string     `json:"shelf"`
	Folder         string     `json:"folder"`
	Profile        string     `json:"profile"`
	ProfileVersion string     `json:"profile_version"`
	Target         float64    `json:"target_lufs"`
	Tolerance      audio.LU   `json:"tolerance_lu"` // undefined if the profile as it was kept cannot be read
	Ceiling        audio.DBTP `json:"ceiling_dbtp"` // likewise
	Delivery       Delivery   `json:"delivery"`
	// What the profile as it was kept says of the file and of sharing a gain; "" if it cannot be read.
	Format      profile.Format `json:"format"`
	BitRate     int            `json:"bit_rate_kbps"` // 0: the source's, or the best
	Group       profile.Group  `json:"group"`
	State       RunState       `json:"state"`
	CreatedAt   time.Time      `json:"created_at"`
	StartedAt   *time.Time     `json:"started_at"`
	FinishedAt  *time.Time     `json:"finished_at"`
	Jobs        int            `json:"jobs"`
	Waiting     int            `json:"waiting"`
	Working     int            `json:"working"`
	Done        int            `json:"done"`
	Held        int            `json:"held"`
	Failed      int            `json:"failed"`
	Cancelled   int            `json:"cancelled"`
	SecondsDone float64        `json:"audio_done_s"` // duration of the recordings whose job has ended, cancelled ones left out
	BytesDone   int64          `json:"bytes_done"`   // likewise
	BytesTotal  int64          `json:"bytes_total"`
}

// Job is one recording's turn.
type Job struct {
	ID             int64            `json:"id"`
	RunID          int64            `json:"run_id"`
	RecordingID    int64            `json:"recording_id"`
	Path           string           `json:"path"`
	State          JobState         `json:"state"`
	Reason         string           `json:"reason"`
	Output         string           `json:"output"`  // relative to the shelf's Copies folder; "" if nothing was delivered
	SameAs         int64            `json:"same_as"` // the job whose result still stood, so that nothing was done; 0: its own
	Plan           *level.Plan      `json:"plan"`    // without the curve of its ride, see Store.Plan
	Renders        int              `json:"renders"`
	Attempts       int              `json:"attempts"`
	StartedAt      *time.Time       `json:"started_at"`
	FinishedAt     *time.Time       `json:"finished_at"`
	Before         *Figures         `json:"before"`
	Foreseen       *Figures         `json:"foreseen"` // for the plan as first made, before any correction for a lossy encoder
	After          *Figures         `json:"after"`
	SpeechBefore   *float64         `json:"-"` // LUFS, of the speech alone; nil if not defined or not known
	SpeechAfter    *float64         `json:"-"` // likewise
	Treatment      *level.Treatment `json:"treatment"`
	Doubts         []level.Doubt    `json:"doubts"` // why it is held; never nil
	Duration       *float64         `json:"duration_s"`
	Profile        string           `json:"profile"`
	ProfileVersion string           `json:"profile_version"`
}

// JobQuery selects a page of a run's jobs, in id order.
type JobQuery struct {
	RunID int64
	State JobState // "" = all
	After int64    // id of the last job of the page before
	Limit int      // 1 … 1000, 0 = 100
}

// Work is everything a worker needs to do a job.
type Work struct {
	Job       Job
	Recording Recording
	Shelf     Shelf
	Profile   profile.Profile
	Delivery  Delivery
}

// Reading is a stored set of measurements.
type Reading struct {
	ID          int64     `json:"id"`
	RecordingID int64     `json:"recording_id"`
	JobID       int64     `json:"job_id"`
	Kind        string    `json:"kind"` // before, after
	MeasuredAt  time.Time `json:"measured_at"`
	level.Analysis
}

// Event is one line of history. Its id grows with time, so a follower can go on where it stopped.
type Event struct {
	ID          int64     `json:"id"`
	At          time.Time `json:"at"`
	RunID       int64     `json:"run_id"`       // 0 if none
	RecordingID int64     `json:"recording_id"` // 0 if it concerns the run as a whole
	JobID       int64     `json:"job_id"`
	What        string    `json:"what"` // a job state, or: found, changed, missing, moved, restored, run-started, run-finished, run-cancelled
	Words       string    `json:"words"`
}
