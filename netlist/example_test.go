package netlist_test

import (
	"errors"
	"fmt"
	"os"

	"poise/netlist"
)

// Load a file and look at the flat circuit.
func ExampleLoad() {
	design, err := netlist.Load(os.DirFS("../testdata/examples"), "mooring.poise")
	if err != nil {
		fmt.Println(err)
		return
	}
	circuit, err := design.Circuit()
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(design.Title)
	fmt.Println(len(circuit.Nodes), "nodes,", len(circuit.Elements), "parts")
	// Output:
	// Mooring-load monitor: first stage behind a 350 ohm strain bridge
	// 11 nodes, 10 parts
}

// Build a design without text. Its problems are diagnostics, too.
func ExampleBuilder() {
	b := netlist.NewBuilder("divider", "two resistors").
		Rail("vp", 9.0).
		Resistor("R1", "vp", "m", 1e3).
		Resistor("R2", "m", "gnd", "2kohm tol 1%").
		Bench("rest", "expect volts(m) = 6V +- 1%")
	design, err := b.Design()
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Println(design.Benches[0].Expectations[0].Text)

	_, err = netlist.NewBuilder("wrong", "").Rail("vp", 9.0).Resistor("R1", "vp", "gnd", 0.0).Design()
	var problem *netlist.Diagnostic
	fmt.Println(errors.As(err, &problem), problem.Code, problem.Message)
	// Output:
	// volts(m) = 6V +- 1%
	// true P206 R1 has 0 ohm
}
