package report

import (
	"encoding/csv"
	"encoding/json"
	"fmt"
	"io"
	"strconv"
)

// Batch is what one chain made of several tracks. Its JSON is summary.json.
type Batch struct {
	Tool  Tool   `json:"tool"`
	Chain Chain  `json:"chain"`
	Of    string `json:"of"` // tells this chain, with the values changed for the run, from any other
	// Slice says which of how many shares of the tracks this is, as "3/8"; empty: all of them.
	Slice  string  `json:"slice,omitempty"`
	Tracks []Entry `json:"tracks"` // in the order of their folders
}

// Entry is one track of a batch. Of a track with a fault only Folder, Track, Status and Fault are there.
type Entry struct {
	Folder           string `json:"folder"` // of its report, beside the summary
	Track            string `json:"track"`
	Status           string `json:"status"` // Holds, BrokenLimit or Fault
	Verdict          string `json:"verdict,omitempty"`
	Fault            string `json:"fault,omitempty"`
	Seconds          Number `json:"seconds"`
	OverloadS        Number `json:"overload_s"`
	OverloadFraction Number `json:"overload_fraction"`
	OverloadEvents   int    `json:"overload_events"`
	HeardDBFS        Number `json:"heard_dbfs"`
	WantedDBFS       Number `json:"wanted_dbfs"`
	FoldBackDBFS     Number `json:"fold_back_dbfs"`
	BelowWantedDB    Number `json:"fold_back_below_wanted_db"`
	NoiseDBFS        Number `json:"noise_dbfs"`
	BrokenLimits     int    `json:"broken_limits"`
}

// What became of a track.
const (
	Holds       = "holds"
	BrokenLimit = "a limit is broken"
	Fault       = "fault"
)

// EntryOf returns the entry of a run whose report is in a folder.
func EntryOf(run *Run, folder string) Entry {
	e := Entry{
		Folder: folder, Track: run.Track.File, Status: Holds, Verdict: judge(run).Headline, Seconds: run.Track.Seconds,
		OverloadS: run.Overload.Seconds, OverloadFraction: run.Overload.Fraction, OverloadEvents: run.Overload.Events,
		HeardDBFS: run.Converter.RMSDBFS,
	}
	for _, l := range run.Limits {
		if !l.Holds {
			e.BrokenLimits++
			e.Status = BrokenLimit
		}
	}
	for _, l := range run.Layers {
		switch l.Name {
		case "wanted":
			e.WantedDBFS = l.RMSDBFS
		case FoldBack:
			e.FoldBackDBFS, e.BelowWantedDB = l.RMSDBFS, l.BelowWantedDB
		case "noise":
			e.NoiseDBFS = l.RMSDBFS
		}
	}
	return e
}

// WriteJSON writes the batch as summary.json has it.
func (b *Batch) WriteJSON(w io.Writer) error {
	e := json.NewEncoder(w)
	e.SetIndent("", "  ")
	return e.Encode(b)
}

// ReadBatch reads what [Batch.WriteJSON] wrote.
func ReadBatch(r io.Reader) (*Batch, error) {
	d := json.NewDecoder(r)
	d.DisallowUnknownFields()
	var b Batch
	if err := d.Decode(&b); err != nil {
		return nil, err
	}
	return &b, nil
}

// WriteCSV writes a line for each track below a line of headings, figures in full.
func (b *Batch) WriteCSV(w io.Writer) error {
	out := csv.NewWriter(w)
	out.Write([]string{"folder", "track", "status", "verdict", "fault", "seconds", "overload_s", "overload_fraction", "overload_events", "heard_dbfs", "wanted_dbfs", "fold_back_dbfs", "fold_back_below_wanted_db", "noise_dbfs", "broken_limits"})
	for _, e := range b.Tracks {
		out.Write([]string{
			e.Folder, e.Track, e.Status, e.Verdict, e.Fault, e.Seconds.Exact(), e.OverloadS.Exact(), e.OverloadFraction.Exact(), strconv.Itoa(e.OverloadEvents),
			e.HeardDBFS.Exact(), e.WantedDBFS.Exact(), e.FoldBackDBFS.Exact(), e.BelowWantedDB.Exact(), e.NoiseDBFS.Exact(), strconv.Itoa(e.BrokenLimits),
		})
	}
	out.Flush()
	return out.Error()
}

// Line returns what is printed of a track as it ends.
func (e *Entry) Line() string {
	if e.Status == Fault {
		return fmt.Sprintf("%s: fault: %s", e.Track, e.Fault)
	}
	return fmt.Sprintf("%s: %s; overload %s, fold-back %s; %s", e.Track, e.Verdict, seconds(e.OverloadS), dbfs(e.FoldBackDBFS), e.Folder)
}
