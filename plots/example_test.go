package plots_test

import (
	"fmt"
	"io"
	"os"
	"path/filepath"

	"yearflow/plots"
)

// Two figures of a results folder, written beside each other.
func ExampleDraw() {
	dir, err := os.MkdirTemp("", "figures")
	if err != nil {
		fmt.Println(err)
		return
	}
	defer os.RemoveAll(dir)
	create := func(name string) (io.WriteCloser, error) { return os.Create(filepath.Join(dir, name)) }
	figures, err := plots.Draw(os.DirFS("../sim/results/testdata/tiny"), create, plots.Options{Only: []string{"losses", "map"}})
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, f := range figures {
		fmt.Println(f.Name+":", f.Title)
	}
	// Output:
	// losses.png: Losses by kind and day
	// map.png: Feeder tree, coloured by the worst voltage of each place
}
