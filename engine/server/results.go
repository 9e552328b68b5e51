package server

import (
	"cmp"
	"context"
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strings"

	"google.golang.org/grpc/status"

	"leadline/engine/study/results"
	"leadline/engine/study/score"
	"leadline/engine/study/track"
	leadlinev1 "leadline/proto/leadline/v1"
)

// Bounds of what is read in the folder of results.
const (
	resultDepth    = 3         // folders down: STUDY/SETTING/DRIVE
	maxResultName  = 1024      // bytes
	maxResultJSON  = 1 << 20   // bytes of run.json and of score.json
	maxResultTable = 256 << 20 // bytes of track.csv: a day at 10 Hz
	resultsAtOnce  = 2
)

// archive is a folder of results. All is read through a root of the file system:
// neither a name nor a link in it leads out.
type archive struct{ root *os.Root }

// names finds runs, folders with a run.json: up to so many of those that follow one, in
// the order of a walk through the folders.
func (a *archive) names(ctx context.Context, after string, most int) (names []string, err error) {
	err = fs.WalkDir(a.root.FS(), ".", func(at string, d fs.DirEntry, err error) error {
		switch {
		case ctx.Err() != nil:
			return ctx.Err()
		case at == ".":
			return err
		case err != nil:
			return fs.SkipDir // a folder that cannot be read holds no results
		case !d.IsDir():
			return nil
		case strings.HasPrefix(d.Name(), "."):
			return fs.SkipDir // a run that is being written
		case walked(at, after):
			return fs.SkipDir
		}
		if _, err := a.root.Lstat(filepath.Join(filepath.FromSlash(at), results.RunFile)); err == nil {
			if names = append(names, at); len(names) == most {
				return fs.SkipAll
			}
			return fs.SkipDir
		}
		if strings.Count(at, "/") == resultDepth-1 {
			return fs.SkipDir
		}
		return nil
	})
	return names, err
}

// walked reports whether a walk that has come to a run is past a folder and all that is
// in it.
func walked(folder, run string) bool {
	return slices.Compare(strings.Split(folder, "/"), strings.Split(run, "/")) <= 0 && !strings.HasPrefix(run, folder+"/")
}

// json reads a file of a run.
func (a *archive) json(name, file string, into any) error {
	at := path.Join(name, file)
	f, err := a.root.Open(filepath.FromSlash(at))
	if err != nil {
		return unread(at, err)
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, maxResultJSON+1))
	switch {
	case err != nil:
		return unread(at, err)
	case len(text) > maxResultJSON:
		return fmt.Errorf("%s has more than %d bytes: make it again with `leadline replay --out`", at, maxResultJSON)
	}
	if err := json.Unmarshal(text, into); err != nil {
		return fmt.Errorf("%s: %w: make it again with `leadline replay --out`", at, err)
	}
	return nil
}

// unread words why a file cannot be read, by its name in the folder.
func unread(at string, err error) error {
	var p *fs.PathError
	if errors.As(err, &p) {
		err = p.Err
	}
	return fmt.Errorf("%s cannot be read (%w): make it again with `leadline replay --out`", at, err)
}

// describe says what a run was; what cannot be read is a sentence.
func (a *archive) describe(name string) *leadlinev1.ResultDescription {
	out := &leadlinev1.ResultDescription{Name: name}
	var run results.Run
	var sc score.Score
	if err := errors.Join(a.json(name, results.RunFile, &run), a.json(name, results.ScoreFile, &sc)); err != nil {
		out.Trouble, _, _ = strings.Cut(clip(err.Error()), "\n")
		return out
	}
	out.Drive, out.Setting, out.Vehicle, out.Suite = clip(run.Drive), clip(run.Setting), clip(run.Vehicle), clip(run.Suite)
	out.Map, out.MapFingerprint, out.AlertLimitM = clip(filepath.Base(run.Map)), clip(run.MapFingerprint), run.AlertLimitM
	out.Partial, out.Stopped = run.Partial, clip(run.Stopped)
	out.Posteriors = uint64(max(sc.Posteriors, 0))
	out.P50M, out.P95M, out.MaxM, out.Coverage95 = sc.Figures.P50M, sc.Figures.P95M, sc.Figures.MaxM, sc.Figures.Coverage95
	return out
}

// ListResults lists results: see the .proto file.
func (s *Server) ListResults(ctx context.Context, req *leadlinev1.ListResultsRequest) (*leadlinev1.ListResultsResponse, error) {
	size := cmp.Or(int(req.GetPageSize()), defaultPage)
	if size > maxPage {
		return nil, badField("page_size", "page_size %d: at most %d", size, maxPage)
	}
	after, err := base64.RawURLEncoding.DecodeString(req.GetPageToken())
	if err != nil || len(after) > maxResultName {
		return nil, refuse(leadlinev1.Reason_REASON_BAD_TOKEN, about{"field": "page_token"}, "page_token is none: give next_page_token of the page before, or leave it out")
	}
	a, done, err := s.archive(ctx)
	if err != nil {
		return nil, err
	}
	defer done()
	names, err := a.names(ctx, string(after), size+1) // one more says that there are more
	if err != nil {
		return nil, resultTrouble(ctx, ".", err)
	}
	out := &leadlinev1.ListResultsResponse{}
	for _, name := range names[:min(len(names), size)] {
		out.Results = append(out.Results, a.describe(name))
	}
	if len(names) > size {
		out.NextPageToken = base64.RawURLEncoding.EncodeToString([]byte(names[size-1]))
	}
	return out, nil
}

// archive waits until the folder may be read, and opens it. The caller must call
// done.
func (s *Server) archive(ctx context.Context) (a *archive, done func(), err error) {
	if s.cfg.Results == "" {
		return nil, nil, refuse(leadlinev1.Reason_REASON_NOT_OFFERED, nil, "this server has no folder of results: its operator must name one")
	}
	select {
	case s.readingResults <- struct{}{}:
	case <-s.draining:
		return nil, nil, errStopping
	case <-ctx.Done():
		return nil, nil, status.FromContextError(ctx.Err()).Err()
	}
	root, err := os.OpenRoot(s.cfg.Results)
	if err != nil {
		<-s.readingResults
		return nil, nil, resultTrouble(ctx, ".", unread("the folder of results", err))
	}
	return &archive{root}, func() {
		_ = root.Close()
		<-s.readingResults
	}, nil
}

// resultTrouble words what is wrong with the files of a result.
func resultTrouble(ctx context.Context, name string, err error) error {
	if ctx.Err() != nil {
		return status.FromContextError(ctx.Err()).Err()
	}
	words, _, _ := strings.Cut(err.Error(), "\n")
	return refuse(leadlinev1.Reason_REASON_BAD_RESULT, about{"result": name}, "results: %s", words)
}

// ReadResult reads one of them: see the .proto file.
func (s *Server) ReadResult(ctx context.Context, req *leadlinev1.ReadResultRequest) (*leadlinev1.ReadResultResponse, error) {
	name := req.GetName()
	// A name is a folder below, as ListResults has it, and none of ours is hidden.
	if len(name) > maxResultName || !fs.ValidPath(name) || name == "." || strings.HasPrefix(name, ".") || strings.Contains(name, "/.") ||
		strings.ContainsAny(name, "\\\x00\n") || strings.Count(name, "/") >= resultDepth {
		return nil, badField("name", "name %q: give the name of a result, as ListResults has it, such as given/van", clip(name[:min(len(name), 100)]))
	}
	a, done, err := s.archive(ctx)
	if err != nil {
		return nil, err
	}
	defer done()
	if _, err := a.root.Lstat(filepath.Join(filepath.FromSlash(name), results.RunFile)); err != nil {
		return nil, refuse(leadlinev1.Reason_REASON_UNKNOWN_RESULT, about{"result": name}, "there is no result of the name %q here: ListResults says which there are", clip(name))
	}
	out := &leadlinev1.ReadResultResponse{Result: a.describe(name)}
	if why := out.GetResult().GetTrouble(); why != "" {
		return nil, refuse(leadlinev1.Reason_REASON_BAD_RESULT, about{"result": name}, "results: %s", why)
	}
	at := path.Join(name, results.TableFile)
	f, err := a.root.Open(filepath.FromSlash(at))
	if err != nil {
		return nil, resultTrouble(ctx, name, unread(at, err))
	}
	defer f.Close()
	if info, err := f.Stat(); err != nil || info.Size() > maxResultTable {
		return nil, refuse(leadlinev1.Reason_REASON_BAD_RESULT, about{"result": name}, "results: %s is no file of at most %d MiB: replay a part of the drive", at, maxResultTable>>20)
	}
	var kept moments
	var raised heldAlarms
	for row, err := range track.Rows(io.LimitReader(f, maxResultTable), at) {
		if err == nil && ctx.Err() != nil {
			err = ctx.Err()
		}
		if err == nil {
			err = kept.add(row)
		}
		if err != nil {
			return nil, resultTrouble(ctx, name, err)
		}
		raised.add(row)
	}
	if len(kept.rows) == 0 {
		return nil, resultTrouble(ctx, name, fmt.Errorf("%s has no lines beside its first: make it again with `leadline replay --out`", at))
	}
	out.Moments, out.Alarms = kept.messages(), raised.messages
	return out, nil
}
