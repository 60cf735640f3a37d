module tautwire

go 1.26.0

require (
	github.com/BurntSushi/toml v1.6.0
	github.com/go-audio/audio v1.0.0
	github.com/go-audio/riff v1.0.0
	github.com/go-audio/wav v1.1.0
	github.com/gordonklaus/portaudio v0.0.0-20250206071425-98a94950218b
	github.com/mattn/go-isatty v0.0.20
	github.com/rs/zerolog v1.35.1
	gitlab.com/gomidi/midi/v2 v2.3.16
	golang.org/x/sys v0.50.0
	gonum.org/v1/gonum v0.17.0
)

require github.com/mattn/go-colorable v0.1.14 // indirect
