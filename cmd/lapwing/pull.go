package main

import (
	"archive/tar"
	"context"
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
	"lapwing/internal/wire"
)

func pullCommand() *cobra.Command {
	var daemon, state, out string
	cmd := &cobra.Command{
		Use:   "pull [CLIP]",
		Short: "Fetch protected raw samples as WAV, with the skid file beside them",
		Long: `pull lists the protected clips, or fetches one: the raw converter codes exactly as sampled (WAV),
the skid file and the process values of that time, and a note. lapwing review runs on them at once;
any program that reads WAVE_FORMAT_EXTENSIBLE opens the samples.

It asks the running daemon. When the daemon is down, name its state folder with --state.

A recording is evidence for an analyst, not a permit to work on the machine.`,
		Example: `  lapwing pull
  lapwing pull 20300501T120000Z-17 --out evidence`,
		Args: cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			ctx := cmd.Context()
			if len(args) == 0 {
				clips, err := listClips(ctx, daemon, state)
				if err != nil {
					return err
				}
				return printClips(cmd.OutOrStdout(), clips)
			}
			dir := filepath.Join(out, "clip-"+filepath.Base(args[0]))
			if err := os.MkdirAll(dir, 0o755); err != nil {
				return err
			}
			var err error
			if state != "" {
				err = station.ExportFrom(ctx, state, args[0], dir)
			} else {
				err = fetchClip(ctx, daemon, args[0], dir, cmd.ErrOrStderr())
			}
			if err != nil {
				_ = os.Remove(dir) // only if nothing was written
				return err
			}
			fmt.Fprintln(cmd.OutOrStdout(), dir)
			return nil
		},
	}
	f := cmd.Flags()
	f.StringVar(&daemon, "daemon", "http://127.0.0.1:8411", "address of the running daemon's page")
	f.StringVar(&state, "state", "", "read this state folder instead (the daemon must be down)")
	f.StringVar(&out, "out", ".", "folder to put the clip's folder in")
	return cmd
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

// fetchClip unpacks the daemon's answer; names with a path in them are refused.
func fetchClip(ctx context.Context, daemon, id, dir string, progress io.Writer) error {
	body, err := get(ctx, daemon, "/api/v1/clips/"+url.PathEscape(id))
	if err != nil {
		return fmt.Errorf("clip %s: %w (lapwing pull without a name lists them)", id, err)
	}
	defer body.Close()
	began := time.Now()
	var total int64
	tr := tar.NewReader(body)
	for {
		h, err := tr.Next()
		if errors.Is(err, io.EOF) {
			fmt.Fprintf(progress, "%.1f MiB in %.1f s\n", float64(total)/(1<<20), time.Since(began).Seconds())
			return nil
		}
		if err != nil {
			return fmt.Errorf("the clip did not arrive whole: %w", err)
		}
		if h.Name != filepath.Base(h.Name) || strings.HasPrefix(h.Name, ".") {
			return fmt.Errorf("the answer holds a file named %q; refused", h.Name)
		}
		n, err := save(filepath.Join(dir, h.Name), tr)
		if err != nil {
			return err
		}
		total += n
		fmt.Fprintf(progress, "  %s  %d bytes\n", h.Name, n)
	}
}

func save(path string, r io.Reader) (n int64, err error) {
	f, err := os.OpenFile(path, os.O_CREATE|os.O_EXCL|os.O_WRONLY, 0o644)
	if err != nil {
		return 0, err
	}
	defer func() { err = errors.Join(err, f.Close()) }()
	return io.Copy(f, r)
}
