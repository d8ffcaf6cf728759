package feeder_test

import (
	"fmt"
	"testing/fstest"

	"yearflow/sim/feeder"
)

// A study is any file system: a folder, an archive, or, as here, a few texts.
func ExampleOpen() {
	study := fstest.MapFS{}
	for name, text := range map[string]string{
		"study.toml":               "[period]\nstart = 2025-01-01\nend = 2025-01-02\nzone = \"UTC\"\n",
		"feeder/source.csv":        "node,nominal [kV]\nsub,12.47\n",
		"feeder/constructions.csv": "construction,kind,r1 [ohm/mi],x1 [ohm/mi],r0 [ohm/mi],x0 [ohm/mi]\nline,sequence,0.306,0.627,0.774,1.937\n",
		"feeder/sections.csv":      "section,from,to,phases,length [ft],construction\nmain,sub,mill,ABC,5280,line\n",
		"feeder/loads.csv":         "load,node,phases,real [kW],power factor\nmill,mil,ABC,850,0.92\n",
	} {
		study[name] = &fstest.MapFile{Data: []byte(text)}
	}
	_, err := feeder.Open(study, "")
	fmt.Println(err)

	study["feeder/loads.csv"].Data = []byte("load,node,phases,real [MW],power factor\nmill,mill,ABC,0.85,0.92\n")
	s, err := feeder.Open(study, "")
	if err != nil {
		fmt.Println(err)
		return
	}
	d := s.Describe()
	fmt.Printf("%d nodes, %.3f km, %.0f kW and %.0f kvar\n", d.Nodes, d.LengthKM, d.LoadKW, d.LoadKVAR)
	// Output:
	// feeder/loads.csv:2:2: load "mill": unknown node "mil"; did you mean "mill"?
	// 2 nodes, 1.609 km, 850 kW and 362 kvar
}
