package main

import (
	"bytes"
	"errors"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"
	"github.com/spf13/cobra/doc"
)

func newMan() *cobra.Command {
	var dir string
	cmd := &cobra.Command{
		Use:   "man --out DIR",
		Short: "manual pages, one file a command",
		Long: `man writes the manual pages of foldshade and of each of its commands into a
folder, which is made when it is not there. Pages of an earlier run are replaced.`,
		Example: `  foldshade man --out man1 && man man1/foldshade-layers.1`,
		Args:    exactly(),
		RunE: func(cmd *cobra.Command, _ []string) error {
			if dir == "" {
				return usagef("--out DIR is missing")
			}
			return writeMan(cmd.Root(), dir)
		},
	}
	newFlags(cmd).StringVar(&dir, "out", "", "folder for the pages")
	inGroup(cmd, groupOutput, "out DIR")
	cmd.DisableFlagsInUseLine = true
	return cmd
}

// writeMan writes the page of a command and those of its sub-commands.
func writeMan(cmd *cobra.Command, dir string) error {
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return outputf("--out %q: %w", dir, reason(err))
	}
	for _, c := range append([]*cobra.Command{cmd}, cmd.Commands()...) {
		if c != cmd && (!c.IsAvailableCommand() || c.Name() == "completion") {
			continue
		}
		var page bytes.Buffer
		header := &doc.GenManHeader{Section: "1", Source: "foldshade " + toolVersion(), Manual: "foldshade manual"}
		if err := doc.GenMan(c, header, &page); err != nil {
			return err
		}
		name := strings.ReplaceAll(c.CommandPath(), " ", "-") + ".1"
		if err := replaceFile(filepath.Join(dir, name), page.Bytes()); err != nil {
			return err
		}
	}
	return nil
}

// replaceFile writes a file beside its final name, syncs it and renames it.
func replaceFile(name string, content []byte) (err error) {
	f, err := os.CreateTemp(filepath.Dir(name), "."+filepath.Base(name)+"-*")
	if err != nil {
		return outputf("%q: %w", name, reason(err))
	}
	defer func() {
		if err != nil {
			_ = f.Close()
			_ = os.Remove(f.Name())
			err = outputf("%q: %w", name, reason(err))
		}
	}()
	if _, err = f.Write(content); err != nil {
		return err
	}
	if err = f.Chmod(0o644); err != nil {
		return err
	}
	if err = f.Sync(); err != nil {
		return err
	}
	if err = f.Close(); err != nil {
		return err
	}
	return os.Rename(f.Name(), name)
}

// reason strips the path and the call from a file error, for messages that
// name the path themselves.
func reason(err error) error {
	var path *os.PathError
	if errors.As(err, &path) {
		return path.Err
	}
	var link *os.LinkError
	if errors.As(err, &link) {
		return link.Err
	}
	return err
}
