package main

import (
	"fmt"
	"os"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"leadline/network/roadfile"
	"leadline/terrain"
	"leadline/terrain/heightfile"
)

func mapRoadsCommand() *cobra.Command {
	var o roadfile.Options
	var out, heights string
	var maxKM float64
	var asJSON bool
	c := &cobra.Command{
		Use:   "roads IN -o TOWN" + roadfile.Suffix,
		Short: "Compile a road map from GeoJSON or an OpenStreetMap extract",
		Args:  cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			if err := needSuffix(out, roadfile.Suffix); err != nil {
				return err
			}
			if !(o.Map.CellM >= 0.05 && o.Map.CellM <= 1000) {
				return fmt.Errorf("--cell is %v: give metres, 0.05 to 1000", o.Map.CellM)
			}
			if !(o.Map.UTurnWeight >= 0 && o.Map.UTurnWeight < 1) {
				return fmt.Errorf("--u-turns is %v: give a probability, 0 or more and below 1", o.Map.UTurnWeight)
			}
			if !(o.JoinM >= 0 && o.JoinM <= 50) {
				return fmt.Errorf("--join is %v: give metres, 0 to 50; 0 joins nothing", o.JoinM)
			}
			if o.JoinM == 0 {
				o.JoinM = -1 // given as 0: join nothing; the default is not 0
			}
			o.Map.MaxLengthM = maxKM * 1000
			if heights != "" {
				h, err := openMap(heights)
				if err != nil {
					return err
				}
				defer h.Close()
				if h.Heights == nil {
					return fmt.Errorf("--heights %s is no height map: give one that ends in %s", heights, heightfile.Suffix)
				}
				o.Map.Heights = h.Heights
			}
			if err := exists(args[0]); err != nil {
				return err
			}
			began := time.Now()
			m, notes, err := roadfile.Read(args[0], o)
			if err != nil {
				return err
			}
			if err := roadfile.Write(out, m); err != nil {
				return err
			}
			w := c.OutOrStdout()
			_, strongM := m.Core()
			if asJSON {
				return printJSON(w, compiledRoads{compiled{out, m.Fingerprint(), time.Since(began).Seconds()}, m.Charts(), strongM, notes})
			}
			fmt.Fprintln(w, notes)
			fmt.Fprintf(w, "%s: %d directed edges; the largest strongly connected part has %.1f km of them; %.1f s\n",
				out, m.Charts(), strongM/1000, time.Since(began).Seconds())
			fmt.Fprintf(w, "next: %s map check %s --png %s\n", programName(), shellWord(out), shellWord(mapName(out)+".png"))
			return nil
		},
	}
	f := c.Flags()
	f.StringVarP(&out, "output", "o", "", "the compiled map, NAME"+roadfile.Suffix)
	must(c.MarkFlagRequired("output"))
	f.Float64Var(&o.JoinM, "join", 0.5, "join an end to a line that comes this near, in metres; 0 joins nothing")
	f.Float64Var(&o.Map.CellM, "cell", 1, "greatest width of a cell, in metres")
	f.BoolVar(&o.SplitCrossings, "split-crossings", false, "make a junction wherever lines on one layer cross")
	f.Float64Var(&o.Map.UTurnWeight, "u-turns", 0, "probability of turning round at an ordinary junction, below 1")
	f.StringVar(&heights, "heights", "", "drape this height map (NAME"+heightfile.Suffix+") over the roads")
	f.Float64Var(&o.Map.HeightSigmaM, "sigma", 2, "standard deviation of the heights in the file, in metres")
	f.StringSliceVar(&o.Classes, "classes", nil, "values of the highway tag to take, or * for all (default: roads for motor traffic)")
	f.BoolVar(&o.SkipPrivate, "skip-private", false, "leave out roads with access=no or access=private")
	f.Int64Var(&o.MaxBytes, "max-bytes", 4<<30, "refuse larger files")
	f.Float64Var(&maxKM, "max-km", 2e5, "refuse maps with more kilometres of directed edges")
	f.StringVar(&o.Map.Source, "source", "", "where the roads come from (default: the name of the file)")
	f.StringVar(&o.Map.Licence, "licence", "", "licence of the roads (default: what the file says)")
	f.BoolVar(&asJSON, "json", false, "print what was read and made as JSON")
	return c
}

// compiled is what is said of a map that was compiled.
type compiled struct {
	Map         string  `json:"map"` // the file
	Fingerprint string  `json:"fingerprint_sha256"`
	Seconds     float64 `json:"seconds"`
}

type compiledRoads struct {
	compiled
	DirectedEdges      int     `json:"directed_edges"`
	StronglyConnectedM float64 `json:"strongly_connected_m"` // of the largest part
	roadfile.Notes
}

type compiledHeights struct {
	compiled
	Format        string   `json:"format"`
	Columns       int      `json:"columns"`
	Rows          int      `json:"rows"`
	VerticalDatum string   `json:"vertical_datum"`
	Notes         []string `json:"notes"`
}

func mapHeightsCommand() *cobra.Command {
	var o heightfile.Options
	var out, crs, unit, vertical string
	var asJSON bool
	c := &cobra.Command{
		Use:   "heights IN -o RELIEF" + heightfile.Suffix,
		Short: "Compile a height map from ESRI ASCII, SRTM .hgt, GeoTIFF or netCDF classic",
		Args:  cobra.ExactArgs(1),
		RunE: func(c *cobra.Command, args []string) error {
			if err := needSuffix(out, heightfile.Suffix); err != nil {
				return err
			}
			o.Unit, o.Vertical = heightfile.Unit(unit), heightfile.Vertical(vertical)
			if crs != "" {
				var err error
				if o.CRS, err = terrain.ParseCRS(crs); err != nil {
					return fmt.Errorf("--crs: %w", err)
				}
			}
			if err := exists(args[0]); err != nil {
				return err
			}
			began := time.Now()
			res, err := heightfile.Read(args[0], o)
			if err != nil {
				return err
			}
			if err := heightfile.Write(out, res.Raster); err != nil {
				return err
			}
			w := c.OutOrStdout()
			g, datum := res.Raster.Grid(), res.Raster.Meta().VerticalDatum
			notes := append([]string{}, res.Warnings...)
			if asJSON {
				return printJSON(w, compiledHeights{compiled{out, res.Raster.Fingerprint(), time.Since(began).Seconds()}, res.Format, g.Cols, g.Rows, datum, notes})
			}
			for _, note := range notes {
				fmt.Fprintln(w, "note:", note)
			}
			fmt.Fprintf(w, "%s: %s, %d × %d samples; %.1f s\n", out, res.Format, g.Cols, g.Rows, time.Since(began).Seconds())
			fmt.Fprintf(w, "next: %s map check %s --png %s\n", programName(), shellWord(out), shellWord(mapName(out)+".png"))
			return nil
		},
	}
	f := c.Flags()
	f.StringVarP(&out, "output", "o", "", "the compiled map, NAME"+heightfile.Suffix)
	must(c.MarkFlagRequired("output"))
	f.StringVar(&crs, "crs", "", "coordinate system, such as EPSG:4326 or utm:33N (default: what the file says)")
	f.StringVar(&unit, "unit", "", "unit of the heights: m, ft or us-ft (default: what the file says, or m)")
	f.StringVar(&vertical, "vertical", "", "direction in which the numbers grow: up (heights) or down (depths)")
	f.Float64Var(&o.SigmaM, "sigma", 0, "standard deviation of the heights' error, in metres")
	f.Float64Var(&o.LE90M, "le90", 0, "or their linear error at 90 %, in metres")
	f.StringVar(&o.VerticalDatum, "datum", "", "what the heights are above, such as EGM96")
	f.StringVar(&o.Variable, "variable", "", "netCDF: the variable that holds heights")
	f.IntVar(&o.MaxSamples, "max-samples", terrain.MaxSamples, "refuse larger rasters")
	f.StringVar(&o.Source, "source", "", "where the heights come from")
	f.StringVar(&o.Licence, "licence", "", "licence of the heights")
	f.BoolVar(&asJSON, "json", false, "print what was read and made as JSON")
	return c
}

// exists gives a missing input a line of its own.
func exists(path string) error {
	info, err := os.Stat(path)
	switch {
	case os.IsNotExist(err):
		return fmt.Errorf("there is no file %s: check the path", path)
	case err == nil && info.IsDir():
		return fmt.Errorf("%s is a folder: give a file", path)
	}
	return err
}

// must panics on an error that only a mistake in this program can cause.
func must(err error) {
	if err != nil {
		panic("leadline: " + strings.TrimSpace(err.Error()))
	}
}
