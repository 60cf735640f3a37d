package config

import (
	"embed"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"strings"
)

// DefaultPatch is the built-in patch that plays when none is asked for.
const DefaultPatch = "lamp-room"

// extension of patch and rig files; names may leave it out.
const extension = ".toml"

// largestFile in bytes; a patch of 128 zones with every key has about 100 kB.
const largestFile = 256 << 10

//go:embed builtin/*.toml
var builtin embed.FS

// Builtins are the names of the built-in patches, in the order of the alphabet.
func Builtins() []string {
	files, err := fs.Glob(builtin, "builtin/*"+extension)
	if err != nil {
		return nil // the pattern is a constant and has no error
	}
	for i, file := range files {
		files[i] = strings.TrimSuffix(path.Base(file), extension)
	}
	return files
}

// Builtin is the text of a built-in patch, for a player to copy and change.
//
// # Errors
//
// A Problem for a name that Builtins does not have.
func Builtin(name string) ([]byte, error) {
	text, err := builtin.ReadFile("builtin/" + strings.TrimSuffix(name, extension) + extension)
	if err != nil {
		return nil, &Problem{Path: name, Text: "no such built-in patch; there are " + strings.Join(Builtins(), ", ")}
	}
	return text, nil
}

// Place is where a file was found.
type Place struct {
	// Path of the file, or the name of the built-in patch.
	Path    string
	Builtin bool
}

// Find looks for a patch: as named, then in $XDG_CONFIG_HOME/tautwire
// (~/.config/tautwire where that is not set), then in /etc/tautwire, then among
// the built-in ones; with the name as it is, and with .toml behind it. A name
// from the root is looked for as named only.
//
// # Errors
//
// Problems with one that says where was looked, and guesses a misspelt name.
func Find(name string) (Place, error) { return searchFor("patch").find(name) }

// search is an order of folders to look for a kind of file in.
type search struct {
	kind    string // "patch" or "rig"
	first   string // the folder that names are relative to
	folders []string
	builtin bool
}

func searchFor(kind string) search {
	s := search{kind: kind, builtin: kind == "patch"}
	if dir, err := os.UserConfigDir(); err == nil {
		s.folders = append(s.folders, filepath.Join(dir, "tautwire"))
	}
	s.folders = append(s.folders, "/etc/tautwire")
	return s
}

func (s search) find(name string) (Place, error) {
	if strings.TrimSpace(name) == "" {
		return Place{}, Problems{{Path: "(no name)", Text: s.kind + " has no name; write a file's name"}}
	}
	folders := append([]string{s.first}, s.folders...)
	if filepath.IsAbs(name) {
		folders = []string{""}
	}
	var odd error
	for _, folder := range folders {
		for _, file := range []string{name, name + extension} {
			at := filepath.Join(folder, file)
			info, err := os.Stat(at)
			switch {
			case err == nil && info.Mode().IsRegular():
				return Place{Path: at}, nil
			case err == nil && odd == nil:
				odd = notAFile(name, s.kind, info)
			case err != nil && !errors.Is(err, fs.ErrNotExist) && odd == nil:
				odd = Problems{{Path: name, Text: fmt.Sprintf("cannot be looked at: %s; check the path and its permissions", reason(err))}}
			}
		}
	}
	short := strings.TrimSuffix(name, extension)
	for _, one := range Builtins() {
		if s.builtin && one == short {
			return Place{Path: one, Builtin: true}, nil
		}
	}
	if odd != nil {
		return Place{}, odd
	}
	return Place{}, Problems{{Path: name, Text: s.lost(short)}}
}

func notAFile(name, kind string, info fs.FileInfo) error {
	what := "is no ordinary file"
	if info.IsDir() {
		what = "is a folder"
	}
	return Problems{{Path: name, Text: what + "; name a " + kind + " file in it"}}
}

// lost says where a name was looked for.
func (s search) lost(name string) string {
	text := "no such " + s.kind
	if filepath.IsAbs(name) {
		return text + "; check the path"
	}
	places := []string{"here"}
	for _, folder := range s.folders {
		places = append(places, "in "+folder)
	}
	if !s.builtin {
		return text + " " + or(places) + "; check the name"
	}
	text += " " + or(append(places, "built in"))
	if near := nearest(filepath.Base(name), Builtins()); near != "" {
		return text + fmt.Sprintf("; did you mean %q?", near)
	}
	return text + "; built in are " + strings.Join(Builtins(), ", ")
}

// read gives the text at a place.
//
// # Errors
//
// Problems with one, for a file that cannot be read or is too large.
func (p Place) read() ([]byte, error) {
	if p.Builtin {
		text, err := Builtin(p.Path)
		if err != nil {
			return nil, Problems{{Path: p.Path, Text: err.Error()}}
		}
		return text, nil
	}
	text, err := readUpTo(p.Path, largestFile)
	if err != nil {
		return nil, Problems{{Path: p.Path, Text: err.Error()}}
	}
	return text, nil
}

// errTooLarge is readUpTo's answer to a larger file.
type errTooLarge struct{ limit int64 }

func (e errTooLarge) Error() string {
	return fmt.Sprintf("is larger than %d kB; check that it is the right one", e.limit>>10)
}

// readUpTo reads an ordinary file whole. The error does not name the file.
func readUpTo(path string, limit int64) ([]byte, error) {
	info, err := os.Stat(path)
	if err == nil && info.IsDir() {
		return nil, errors.New("is a folder; name a file in it")
	}
	if err == nil && !info.Mode().IsRegular() {
		return nil, errors.New("is no ordinary file; name one")
	}
	if err != nil {
		return nil, fmt.Errorf("cannot be read: %s; check the name and the permissions", reason(err))
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("cannot be read: %s; check the name and the permissions", reason(err))
	}
	defer f.Close()
	text, err := io.ReadAll(io.LimitReader(f, limit+1))
	if err != nil {
		return nil, fmt.Errorf("cannot be read: %s; check the disk", reason(err))
	}
	if int64(len(text)) > limit {
		return nil, errTooLarge{limit}
	}
	return text, nil
}

// reason is what went wrong without the path, which the message has already.
func reason(err error) string {
	var p *fs.PathError
	if errors.As(err, &p) {
		err = p.Err
	}
	return err.Error()
}
