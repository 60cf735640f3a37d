package main

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"gonum.org/v1/plot/vg"
	"gonum.org/v1/plot/vg/draw"
	"gonum.org/v1/plot/vg/vgimg"
	"gonum.org/v1/plot/vg/vgsvg"

	"tautwire/config"
)

// The forms of a picture, and so the ends of its file's name.
const (
	pictureSVG = "svg"
	picturePNG = "png"
)

// plotPatches draws patches into a folder, which is made where it is missing, and prints the pictures' paths.
// Of several patches each has a folder of its own inside. Every patch is read before the first is
// drawn, and all that is wrong is told, a line each.
func plotPatches(ctx context.Context, s streams, dir, form string, names []string) error {
	patches := make([]*config.Patch, len(names))
	folders := make([]string, len(names))
	owner := map[string]string{} // of a folder
	failed := false
	for i, name := range names {
		folders[i] = dir
		if len(names) > 1 {
			folders[i] = filepath.Join(dir, strings.TrimSuffix(filepath.Base(name), ".toml"))
		}
		var err error
		if other, taken := owner[folders[i]]; taken {
			err = fmt.Errorf("%s: its pictures and those of %s would go to %s; draw one at a time", name, other, folders[i])
		} else if isRig(name) {
			err = fmt.Errorf("%s: found a rig; name patches to be drawn", name)
		} else {
			patches[i], err = config.LoadPatch(name)
		}
		owner[folders[i]] = name
		if err != nil {
			failed = true
			fmt.Fprintln(s.err, err)
		}
	}
	if failed {
		return alreadyTold{}
	}
	for i, patch := range patches {
		keys, err := soundKeys(ctx, s, patch)
		if err != nil {
			return err
		}
		if err := drawPictures(s, folders[i], form, patch, keys); err != nil {
			return err
		}
	}
	return nil
}

// picture is one of a patch's pictures.
type picture struct {
	name          string // of its file, without its form
	width, height vg.Length
	draw          func(draw.Canvas, *config.Patch, []keySound) error
}

func pictures() []picture {
	const wide, high = 24 * vg.Centimeter, 13 * vg.Centimeter
	return []picture{
		{"decay", wide, high, drawDecay},
		{"brightness", wide, high, drawBrightness},
		{"spectrum", wide, 20 * vg.Centimeter, drawSpectra},
		{"pitch", wide, high, drawPitch},
	}
}

// drawPictures writes a patch's pictures into a folder and prints their paths.
func drawPictures(s streams, folder, form string, patch *config.Patch, keys []keySound) error {
	if err := os.MkdirAll(folder, 0o755); err != nil {
		return inFolder(err)
	}
	for _, p := range pictures() {
		path := filepath.Join(folder, p.name+"."+form)
		data, err := p.render(form, patch, keys)
		if err != nil {
			return fmt.Errorf("%s: %w", path, err)
		}
		if err := os.WriteFile(path, data, 0o644); err != nil {
			return inFolder(err)
		}
		if _, err := fmt.Fprintln(s.out, path); err != nil {
			return err
		}
	}
	return nil
}

// inFolder says of a file that can't be written what to do.
func inFolder(err error) error {
	var where *os.PathError
	if errors.As(err, &where) {
		return fmt.Errorf("%s: %w; give --plot a folder that can be written", where.Path, where.Err)
	}
	return err
}

// render is the picture as the bytes of a file.
func (p picture) render(form string, patch *config.Patch, keys []keySound) ([]byte, error) {
	const margin = 12 // points
	var b bytes.Buffer
	if form == picturePNG {
		c := vgimg.PngCanvas{Canvas: vgimg.NewWith(vgimg.UseWH(p.width, p.height), vgimg.UseDPI(144))}
		if err := p.draw(draw.Crop(draw.New(c), margin, -margin, margin, -margin), patch, keys); err != nil {
			return nil, err
		}
		_, err := c.WriteTo(&b)
		return b.Bytes(), err
	}
	c := vgsvg.New(p.width, p.height)
	if err := p.draw(draw.Crop(draw.New(c), margin, -margin, margin, -margin), patch, keys); err != nil {
		return nil, err
	}
	if _, err := c.WriteTo(&b); err != nil {
		return nil, err
	}
	// Where a viewer lacks the font, one of the same widths serves.
	const font = "font-family:Liberation Sans"
	return bytes.ReplaceAll(b.Bytes(), []byte(font), []byte(font+",Arimo,Arial,Helvetica,sans-serif")), nil
}
