package main

import (
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"os"
	"path/filepath"
	"strings"
	"text/tabwriter"
	"time"

	"github.com/spf13/cobra"

	"lapwing/internal/station"
	"lapwing/internal/table"
	"lapwing/internal/wire"
)

func pullCommand() *cobra.Command {
	var daemon, state, out, from, to, turns, tables string
	cmd := &cobra.Command{
		Use:   "pull [CLIP]",
		Short: "Fetch raw samples as WAV, with what belongs to them beside it",
		Long: `pull lists the protected clips, or fetches one, a stretch of time (--from, --to) or a range of
turns (--turns): the raw converter codes exactly as sampled (WAV), the skid file and the process
values of that time, and a note. A clip also brings the state of the line at its beginning, so that
lapwing review repeats the live analysis bit for bit. Any program that reads WAVE_FORMAT_EXTENSIBLE
opens the samples; --tables parquet (or csv) writes tables beside them, as lapwing tables does.

It asks the running daemon. A transfer that breaks goes on where it stopped when the same is asked
again, and every file is checked by its SHA-256. When the daemon is down, name its state folder with
--state.

A recording is evidence for an analyst, not a permit to work on the machine.`,
		Example: `  lapwing pull
  lapwing pull 20300501T120000Z-17 --out evidence --tables parquet
  lapwing pull --from 2031-05-04T03:00:00Z --to 2031-05-04T03:02:00Z
  lapwing pull --turns 120400:121300 --state /var/lib/lapwing`,
		Args: cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			ctx := cmd.Context()
			v := url.Values{}
			for _, p := range [][2]string{{"from", from}, {"to", to}, {"turns", turns}} {
				if p[1] != "" {
					v.Set(p[0], p[1])
				}
			}
			if len(args) == 1 {
				v.Set("clip", args[0])
			}
			if len(v) == 0 {
				clips, err := listClips(ctx, daemon, state)
				if err != nil {
					return err
				}
				return printClips(cmd.OutOrStdout(), clips)
			}
			q, err := wire.ParsePullQuery(v)
			if err != nil {
				return err
			}
			dir := filepath.Join(out, pullFolder(q))
			if err := os.MkdirAll(dir, 0o755); err != nil {
				return err
			}
			if state != "" {
				err = station.PullFrom(state, q, dir)
			} else {
				err = fetch(ctx, daemon, q, dir, cmd.ErrOrStderr())
			}
			if err != nil {
				_ = os.Remove(dir) // only if nothing was written
				return err
			}
			fmt.Fprintln(cmd.OutOrStdout(), dir)
			if tables != "" {
				return tablesBeside(ctx, dir, table.Format(tables), cmd.OutOrStdout())
			}
			return nil
		},
	}
	f := cmd.Flags()
	f.StringVar(&daemon, "daemon", "http://127.0.0.1:8411", "address of the running daemon's page")
	f.StringVar(&state, "state", "", "read this state folder instead (the daemon must be down)")
	f.StringVar(&out, "out", ".", "folder to put the pulled folder in")
	f.StringVar(&from, "from", "", "beginning of a stretch of time (RFC 3339)")
	f.StringVar(&to, "to", "", "its end")
	f.StringVar(&turns, "turns", "", "turns by their live numbers, FIRST:END (END not included)")
	f.StringVar(&tables, "tables", "", "write tables beside the recording too: parquet or csv")
	return cmd
}

// pullFolder names the folder of what is pulled.
func pullFolder(q wire.PullQuery) string {
	switch {
	case q.Clip != "":
		return "clip-" + filepath.Base(q.Clip)
	case q.Turns[1] > q.Turns[0]:
		return fmt.Sprintf("turns-%d-%d", q.Turns[0], q.Turns[1])
	}
	return q.From.UTC().Format("20060102T150405Z") + "-" + q.To.UTC().Format("20060102T150405Z")
}

// tablesBeside writes the tables of a recording just pulled.
func tablesBeside(ctx context.Context, dir string, format table.Format, out io.Writer) error {
	wavs, err := filepath.Glob(filepath.Join(dir, "*.wav"))
	if err != nil || len(wavs) != 1 {
		return fmt.Errorf("%d recordings in %s: no tables", len(wavs), dir)
	}
	base := strings.TrimSuffix(wavs[0], ".wav")
	o := station.TablesOptions{Dir: filepath.Join(dir, "tables"), Format: format, What: []string{"measures", "events", "alarms", "angles"},
		Review: station.ReviewOptions{SkidFile: base + ".skid.yaml", Recording: wavs[0]}}
	if _, err := os.Stat(base + ".process.csv"); err == nil {
		o.Review.ProcessCSV = base + ".process.csv"
	}
	files, err := station.Tables(ctx, o)
	for _, f := range files {
		fmt.Fprintln(out, f)
	}
	return err
}

func listClips(ctx context.Context, daemon, state string) ([]wire.Clip, error) {
	if state != "" {
		return station.ClipsIn(state)
	}
	body, err := get(ctx, daemon, "/api/v1/clips")
	if err != nil {
		return nil, err
	}
	defer body.Close()
	var clips []wire.Clip
	if err := json.NewDecoder(io.LimitReader(body, 16<<20)).Decode(&clips); err != nil {
		return nil, fmt.Errorf("the daemon's list of clips is not readable: %w", err)
	}
	return clips, nil
}

func printClips(w io.Writer, clips []wire.Clip) error {
	if len(clips) == 0 {
		fmt.Fprintln(w, "no clips")
		return nil
	}
	tw := tabwriter.NewWriter(w, 0, 4, 2, ' ', 0)
	fmt.Fprintln(tw, "CLIP\tFROM\tTO\tSIZE\tWHY")
	for _, c := range clips {
		to := c.To.UTC().Format("15:04:05Z")
		if !c.Complete {
			to += " (still recording)"
		}
		fmt.Fprintf(tw, "%s\t%s\t%s\t%.1f MiB\t%s\n", c.ID, c.From.UTC().Format("2006-01-02 15:04:05Z"), to, float64(c.Bytes)/(1<<20), c.Reason)
	}
	return tw.Flush()
}

func get(ctx context.Context, daemon, path string) (io.ReadCloser, error) {
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, strings.TrimRight(daemon, "/")+path, nil)
	if err != nil {
		return nil, err
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		return nil, fmt.Errorf("the daemon does not answer: %w (is it running? else name its state folder with --state)", err)
	}
	if resp.StatusCode != http.StatusOK {
		defer resp.Body.Close()
		msg, _ := io.ReadAll(io.LimitReader(resp.Body, 4096))
		return nil, fmt.Errorf("the daemon says: %s", strings.TrimSpace(string(msg)))
	}
	return resp.Body, nil
}

// fetch brings the files of a pull, each into NAME.part until it is whole and its checksum is right.
func fetch(ctx context.Context, daemon string, q wire.PullQuery, dir string, progress io.Writer) error {
	body, err := get(ctx, daemon, "/api/v1/pull?"+q.Values().Encode())
	if err != nil {
		if q.Clip != "" {
			return fmt.Errorf("clip %s: %w (lapwing pull without a name lists them)", q.Clip, err)
		}
		return err
	}
	var list wire.Pulled
	err = json.NewDecoder(io.LimitReader(body, 1<<20)).Decode(&list)
	if err := errors.Join(err, body.Close()); err != nil {
		return fmt.Errorf("the daemon's answer is not readable: %w", err)
	}
	for _, f := range list.Files {
		if f.Name != filepath.Base(f.Name) || strings.HasPrefix(f.Name, ".") || f.Bytes < 0 {
			return fmt.Errorf("the answer holds a file named %q of %d bytes; refused", f.Name, f.Bytes)
		}
		if err := fetchFile(ctx, daemon, list.Key, f, dir, progress); err != nil {
			return err
		}
	}
	return nil
}

func fetchFile(ctx context.Context, daemon, key string, f wire.PullFile, dir string, progress io.Writer) error {
	path := filepath.Join(dir, f.Name)
	if sum, n, err := sumOf(path); err == nil && n == f.Bytes && sum == f.SHA256 {
		fmt.Fprintf(progress, "  %s  %d bytes, here already\n", f.Name, f.Bytes)
		return nil
	} else if err == nil {
		return fmt.Errorf("%s is there already and is another one: pull into another folder", path)
	}
	// Which contents a part belongs to stands in its name: a part of others is not gone on with.
	part := fmt.Sprintf("%s.%.8s.part", path, f.SHA256)
	w, err := os.OpenFile(part, os.O_CREATE|os.O_WRONLY|os.O_APPEND, 0o644)
	if err != nil {
		return err
	}
	have, err := w.Seek(0, io.SeekEnd)
	if err != nil || have > f.Bytes {
		return errors.Join(err, w.Close(), os.Remove(part))
	}
	err = fetchRest(ctx, daemon, key, f, w, have, progress)
	if err = errors.Join(err, w.Close()); err != nil {
		return fmt.Errorf("%s did not arrive whole: %w (ask for the same again: it goes on from there)", f.Name, err)
	}
	if sum, n, err := sumOf(part); err != nil || n != f.Bytes || sum != f.SHA256 {
		return errors.Join(fmt.Errorf("%s arrived damaged: %d bytes with SHA-256 %s, told were %d and %s; it was thrown away", f.Name, n, sum, f.Bytes, f.SHA256), err, os.Remove(part))
	}
	return os.Rename(part, path)
}

func fetchRest(ctx context.Context, daemon, key string, f wire.PullFile, w io.Writer, have int64, progress io.Writer) error {
	began, from := time.Now(), have
	for have < f.Bytes {
		req, err := http.NewRequestWithContext(ctx, http.MethodGet, strings.TrimRight(daemon, "/")+"/api/v1/pull/"+url.PathEscape(key)+"/"+url.PathEscape(f.Name), nil)
		if err != nil {
			return err
		}
		if have > 0 {
			req.Header.Set("Range", fmt.Sprintf("bytes=%d-", have))
			req.Header.Set("If-Range", `"`+f.SHA256+`"`)
		}
		resp, err := http.DefaultClient.Do(req)
		if err != nil {
			return err
		}
		if want := map[bool]int{true: http.StatusPartialContent, false: http.StatusOK}[have > 0]; resp.StatusCode != want {
			msg, _ := io.ReadAll(io.LimitReader(resp.Body, 4096))
			return errors.Join(fmt.Errorf("the daemon says: %s %s", resp.Status, strings.TrimSpace(string(msg))), resp.Body.Close())
		}
		n, err := io.Copy(w, &counted{r: resp.Body, have: have, of: f.Bytes, name: f.Name, out: progress})
		have += n
		if err = errors.Join(err, resp.Body.Close()); err != nil {
			return err
		}
	}
	fmt.Fprintf(progress, "\r  %s  %d bytes in %.1f s", f.Name, f.Bytes, time.Since(began).Seconds())
	if from > 0 {
		fmt.Fprintf(progress, ", the first %d were here", from)
	}
	fmt.Fprintln(progress)
	return nil
}

// counted tells how far a transfer is, every few MiB.
type counted struct {
	r        io.Reader
	have, of int64
	told     int64
	name     string
	out      io.Writer
}

func (c *counted) Read(b []byte) (int, error) {
	n, err := c.r.Read(b)
	if c.have += int64(n); c.have-c.told > 4<<20 {
		c.told = c.have
		fmt.Fprintf(c.out, "\r  %s  %3.0f %%", c.name, 100*float64(c.have)/float64(c.of))
	}
	return n, err
}

func sumOf(path string) (sum string, n int64, err error) {
	f, err := os.Open(path)
	if err != nil {
		return "", 0, err
	}
	defer f.Close()
	h := sha256.New()
	n, err = io.Copy(h, f)
	return hex.EncodeToString(h.Sum(nil)), n, err
}

func save(path string, r io.Reader) (n int64, err error) {
	f, err := os.OpenFile(path, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o644)
	if err != nil {
		return 0, err
	}
	defer func() { err = errors.Join(err, f.Close()) }()
	return io.Copy(f, r)
}
