package main

import (
	"runtime"
	"runtime/debug"

	"github.com/spf13/cobra"

	"foldshade/dem/raster"
)

// versions are the versions that decide a result.
type versions struct {
	Foldshade string `json:"foldshade"`
	Go        string `json:"go"`
	GDAL      string `json:"gdal"`
	PROJ      string `json:"proj"`
}

func newVersion() *cobra.Command {
	var asJSON bool
	cmd := &cobra.Command{
		Use:     "version [--json]",
		Short:   "the versions of foldshade, Go, GDAL and PROJ",
		Long:    `version prints the versions of foldshade, and of Go, GDAL and PROJ as they run.`,
		Example: `  foldshade version --json`,
		Args:    exactly(),
		RunE: func(cmd *cobra.Command, _ []string) error {
			v := versions{toolVersion(), runtime.Version(), raster.GDALVersion(), raster.PROJVersion()}
			if asJSON {
				return printJSON(cmd.OutOrStdout(), v)
			}
			printPairs(cmd.OutOrStdout(), [][2]string{
				{"foldshade", v.Foldshade}, {"Go", v.Go}, {"GDAL", v.GDAL}, {"PROJ", v.PROJ},
			})
			return nil
		},
	}
	newFlags(cmd).BoolVar(&asJSON, "json", false, "print JSON in place of a table")
	inGroup(cmd, groupOutput, "json")
	cmd.DisableFlagsInUseLine = true
	return cmd
}

// toolVersion is the version that the Go tool stamped into the binary, or
// "(devel)" where it had none to stamp.
func toolVersion() string {
	info, ok := debug.ReadBuildInfo()
	if !ok || info.Main.Version == "" {
		return "(devel)"
	}
	return info.Main.Version
}
