package main

import (
	"context"
	"path"
	"path/filepath"

	"foldshade/dem"
	"foldshade/dem/raster"
	"foldshade/geometry"
	"foldshade/mask"
)

// outputs are the files of a run of layers within a set.
type outputs struct {
	set     *raster.Set
	dir     string // of the set, for messages
	folder  string // below it, empty for none
	looks   []geometry.Look
	writers []map[mask.Layer]*raster.Writer // by look
	tallies []tally                         // by look
	items   []*raster.File                  // catalogue entries, by look
}

// newOutputs opens a writer for every layer of every look.
func newOutputs(j *layersJob, src *raster.DEM, looks []geometry.Look, chosen []mask.Layer, window dem.Window,
	set *raster.Set, folder string) (*outputs, error) {
	o := &outputs{
		set: set, dir: j.out, folder: folder, looks: looks,
		writers: make([]map[mask.Layer]*raster.Writer, len(looks)),
		tallies: make([]tally, len(looks)),
		items:   make([]*raster.File, len(looks)),
	}
	for i, look := range looks {
		if err := o.open(i, j, src, look, chosen, window); err != nil {
			return nil, err
		}
	}
	return o, nil
}

func (o *outputs) open(i int, j *layersJob, src *raster.DEM, look geometry.Look, chosen []mask.Layer, window dem.Window) error {
	o.writers[i] = map[mask.Layer]*raster.Writer{}
	metadata := fileMetadata(j.command, j.label(), look, j.options)
	if s := src.Facts().HeightShift; s != nil {
		metadata["heights"] = shiftText(s)
	}
	for _, l := range chosen {
		info, _ := mask.Info(l)
		w, err := o.set.Writer(path.Join(o.folder, look.Name), rasterLayer(info, look, metadata), src.Grid(), window)
		if err != nil {
			return err
		}
		o.writers[i][l] = w
	}
	item, err := o.set.File(path.Join(o.folder, look.Name, itemName))
	o.items[i] = item
	return err
}

// write hands a tile to the writers of its look.
func (o *outputs) write(look int, chosen []mask.Layer, t *mask.Tile) error {
	for _, l := range chosen {
		w := o.writers[look][l]
		if codes, ok := t.Classes[l]; ok {
			if err := w.WriteBytes(t.Window, codes); err != nil {
				return err
			}
			continue
		}
		for band, values := range t.Values[l] {
			if err := w.WriteFloats(t.Window, band, values); err != nil {
				return err
			}
		}
	}
	return nil
}

// finish makes the rasters and the catalogue entries, still under hidden names.
func (o *outputs) finish(ctx context.Context, j *layersJob, src dem.Source, window dem.Window, chosen []mask.Layer) error {
	bar := newProgress(j.stderr, "writing  ")
	o.set.Progress = bar.update
	err := o.set.Finish(ctx)
	bar.close()
	if err != nil {
		return err
	}
	for i := range o.looks {
		if err := o.writeItem(i, j, src, window, chosen); err != nil {
			return err
		}
	}
	return nil
}

// files returns the paths of the rasters of a look by layer.
func (o *outputs) files(look int) map[string]string {
	paths := map[string]string{}
	for l := range o.writers[look] {
		paths[string(l)] = filepath.Join(o.dir, o.folder, o.looks[look].Name, string(l)+".tif")
	}
	return paths
}

// item returns the path of the catalogue entry of a look.
func (o *outputs) item(look int) string {
	return filepath.Join(o.dir, o.folder, o.looks[look].Name, itemName)
}
