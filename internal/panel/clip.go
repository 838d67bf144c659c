package panel

import (
	"archive/tar"
	"errors"
	"io"
	"io/fs"
	"log/slog"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"time"
)

const (
	exports   = 2                // at a time: each fills a scratch folder
	clipWrite = 15 * time.Minute // for the slowest reader of one clip
)

type clipper struct {
	src  Source
	log  *slog.Logger
	busy chan struct{}
}

// send exports into a scratch folder first: no transaction stays open while a slow client reads.
func (c *clipper) send(w http.ResponseWriter, r *http.Request) {
	id := r.PathValue("id")
	if !clipName(id) {
		http.Error(w, ErrNoClip.Error(), http.StatusNotFound)
		return
	}
	select {
	case c.busy <- struct{}{}:
		defer func() { <-c.busy }()
	default:
		w.Header().Set("Retry-After", "5")
		http.Error(w, "other clips are being written; try again", http.StatusServiceUnavailable)
		return
	}
	dir, err := os.MkdirTemp("", "lapwing-clip-")
	if err != nil {
		c.log.Error("panel: export", "clip", id, "err", err)
		http.Error(w, "no room for the export; see the log", http.StatusInsufficientStorage)
		return
	}
	defer os.RemoveAll(dir)
	_ = http.NewResponseController(w).SetWriteDeadline(time.Now().Add(clipWrite)) // a recorder in a test has none
	switch err := c.src.Export(r.Context(), id, dir); {
	case errors.Is(err, ErrNoClip):
		http.Error(w, ErrNoClip.Error(), http.StatusNotFound)
		return
	case err != nil:
		c.log.Error("panel: export", "clip", id, "err", err)
		http.Error(w, "the clip could not be exported; see the log", http.StatusInternalServerError)
		return
	}
	w.Header().Set("Content-Type", "application/x-tar")
	w.Header().Set("Content-Disposition", `attachment; filename="lapwing-`+id+`.tar"`)
	if err := tarDir(w, dir); err != nil {
		c.log.Warn("panel: clip not sent whole", "clip", id, "err", err)
		panic(http.ErrAbortHandler) // the connection is cut, so that half a clip does not look whole
	}
}

// clipName accepts what a clip can be called, and nothing that could lead out of a folder.
func clipName(id string) bool {
	return id != "" && len(id) <= 128 && id[0] != '.' && strings.Trim(id, "abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789._-") == ""
}

func tarDir(w io.Writer, dir string) error {
	tw := tar.NewWriter(w)
	err := filepath.WalkDir(dir, func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		st, err := d.Info()
		if err != nil {
			return err
		}
		if err := tw.WriteHeader(&tar.Header{Name: d.Name(), Mode: 0o644, Size: st.Size(), ModTime: st.ModTime(), Format: tar.FormatPAX}); err != nil {
			return err
		}
		f, err := os.Open(path)
		if err != nil {
			return err
		}
		defer f.Close()
		_, err = io.Copy(tw, f)
		return err
	})
	return errors.Join(err, tw.Close())
}
