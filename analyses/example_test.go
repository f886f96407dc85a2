package analyses_test

import (
	"context"
	"fmt"
	"os"

	"poise/analyses"
	"poise/netlist"
)

// Load a file and measure quantities of the circuit as written.
func ExampleMeasure() {
	design, err := netlist.Load(os.DirFS("../testdata/examples"), "mooring.poise")
	if err != nil {
		fmt.Println(err)
		return
	}
	setup, err := design.Setup()
	if err != nil {
		fmt.Println(err)
		return
	}
	values, err := analyses.Measure(context.Background(), setup, "volts(out)", "cmrr at 50Hz")
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%.3f V, a ratio of %.1f\n", values[0].Float(), values[1].Float())
	// Output: 4.539 V, a ratio of 73.9
}

// Check every bench of a design.
func ExampleCheck() {
	design, err := netlist.Load(os.DirFS("../testdata/examples"), "mooring.poise")
	if err != nil {
		fmt.Println(err)
		return
	}
	report := analyses.Check(context.Background(), []analyses.Job{{File: "mooring.poise", Design: design}}, analyses.Options{})
	for _, b := range report.Files[0].Benches {
		fmt.Println(b.Name, b.Status)
	}
	// Output:
	// quiet pass
	// rejects pass
	// hum pass
}
