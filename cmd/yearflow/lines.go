package main

import (
	"fmt"
	"io"

	"github.com/spf13/cobra"

	"yearflow/sim/feeder"
)

const kmPerMile = 1.609344

func linesCommand(c *console) *cobra.Command {
	var o instantOptions
	cmd := &cobra.Command{
		Use: "lines [STUDY]", Short: "the impedance and shunt matrices of each construction",
		Long: `Prints, per mile and per kilometre, the series impedance r + jx of each construction,
its inverse the admittance g + jb, and the shunt admittance, by position and in
symmetrical components.`,
		Example: "  yearflow lines\n  yearflow lines --csv lines.csv",
		Args:    atMostOne("study"),
		RunE:    func(_ *cobra.Command, args []string) error { return c.lines(args, &o) },
	}
	cmd.Flags().StringVar(&o.caseName, "case", "", "the `NAME` of a case (default: the study as it stands)")
	cmd.Flags().StringVar(&o.csv, "csv", "", "write the table to this `FILE`; - for standard output")
	cmd.Flags().StringVar(&o.json, "json", "", "write it to this `FILE` as JSON; - for standard output")
	return cmd
}

func (c *console) lines(args []string, o *instantOptions) error {
	st, err := c.find(args)
	if err != nil {
		return err
	}
	s, err := feeder.Open(st.fs, o.caseName)
	if err != nil {
		return inputError{err}
	}
	out := c.quiet(o.csv, o.json)
	rows := [][]string{{"construction", "kind", "basis", "row", "column", "r [ohm/mi]", "x [ohm/mi]", "g [S mi]", "b [S mi]", "shunt [uS/mi]", "r [ohm/km]", "x [ohm/km]", "g [S km]", "b [S km]", "shunt [uS/km]"}}
	for i := range s.Model.Constructions {
		k := &s.Model.Constructions[i]
		fmt.Fprintf(out, "%s (%s, %g Hz)\n", k.Name, k.Kind, s.Settings.Frequency)
		m := k.Matrices
		y, err := m.Admittance()
		if err != nil {
			return inputError{fmt.Errorf("%s: construction %q: %w", k.At, k.Name, err)}
		}
		var b [3][3]complex128
		for r := range m.N {
			for q := range m.N {
				b[r][q] = complex(m.B[r][q], 0)
			}
		}
		names := []string{"1", "2", "3"}
		rows = append(rows, matrixRows(out, k, "phase", names, m.N, m.Z, y, b)...)
		if sym, ok := m.Symmetrical(); ok {
			rows = append(rows, matrixRows(out, k, "sequence", []string{"0", "1", "2"}, 3, sym.Z, sym.Y, sym.B)...)
		}
		fmt.Fprintln(out)
	}
	return c.export(o, rows)
}

// matrixRows prints one set of matrices per mile and per km; b is the shunt
// susceptance, so that the shunt admittance is j·b.
func matrixRows(out io.Writer, k *feeder.Construction, basis string, names []string, n int, z, y, b [3][3]complex128) (rows [][]string) {
	title := map[string]string{"phase": "by position", "sequence": "zero, positive, negative sequence"}[basis]
	t := sheet{left: 1}
	t.add("  "+title, "r + jx [ohm/mi]", "g + jb [S mi]", "shunt [uS/mi]", "r + jx [ohm/km]", "g + jb [S km]", "shunt [uS/km]")
	for r := range n {
		for q := range n {
			if basis == "phase" && q > r {
				continue // symmetric
			}
			zk, yk := z[r][q], y[r][q]
			shunt := b[r][q] * 1e6i // µS/km
			zm, ym, sm := zk*kmPerMile, yk/kmPerMile, shunt*kmPerMile
			t.add(fmt.Sprintf("  %s %s", names[r], names[q]), complexText(zm, 5), complexText(ym, 5), complexText(sm, 5), complexText(zk, 5), complexText(yk, 5), complexText(shunt, 5))
			rows = append(rows, []string{k.Name, k.Kind, basis, names[r], names[q],
				number(real(zm)), number(imag(zm)), number(real(ym)), number(imag(ym)), number(imag(sm)),
				number(real(zk)), number(imag(zk)), number(real(yk)), number(imag(yk)), number(imag(shunt))})
		}
	}
	t.write(out)
	return rows
}
