package report

import (
	"bytes"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"ulpine/results"
	"ulpine/results/report/draw"
)

// PageName is the file name of the page in the directory of a report.
const PageName = "report.html"

// dots is the resolution of PNG files, dots a pixel: 860 px become 2150 dots, 300
// an inch on a page 18 cm wide.
const dots = 2.5

// Write writes a study to a directory, which it makes when it is missing:
// report.html, report.md, figures/NAME.svg and .png, numbers/NAME.csv and
// numbers/numbers.json.
// The page is written last and needs none of the other files.
func Write(dir string, s *results.Study) error {
	v := newView(s)
	for _, d := range []string{filepath.Join(dir, "figures"), filepath.Join(dir, "numbers")} {
		if err := os.MkdirAll(d, 0o755); err != nil {
			return fmt.Errorf("report: %w", err)
		}
	}
	for _, f := range v.figures() {
		base := filepath.Join(dir, "figures", f.ID)
		if err := file(base+".svg", f.WriteFile); err != nil {
			return err
		}
		if err := file(base+".png", func(w io.Writer) error { return f.WritePNG(w, dots) }); err != nil {
			return err
		}
	}
	for _, s := range sheetTable {
		err := file(filepath.Join(dir, "numbers", s.name+".csv"), func(w io.Writer) error { return v.sheet(w, s.name) })
		if err != nil {
			return err
		}
	}
	if err := file(filepath.Join(dir, "numbers", "numbers.json"), v.json); err != nil {
		return err
	}
	if err := file(filepath.Join(dir, MarkdownName), v.markdown); err != nil {
		return err
	}
	return file(filepath.Join(dir, PageName), v.html)
}

// WriteFigures writes the figures alone, as SVG and PNG files on a white ground
// and without a margin, for papers. The directory is made when it is missing.
func WriteFigures(dir string, s *results.Study) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return fmt.Errorf("report: %w", err)
	}
	for _, f := range newView(s).figures() {
		base := filepath.Join(dir, f.ID)
		if err := file(base+".svg", f.WritePlain); err != nil {
			return err
		}
		if err := file(base+".png", func(w io.Writer) error { return f.WritePlainPNG(w, dots) }); err != nil {
			return err
		}
	}
	return nil
}

// Figures draws every figure of a study that has something to show, as the
// figure files hold them.
func Figures(s *results.Study) []*draw.Figure { return newView(s).figures() }

func (v *view) figures() []*draw.Figure {
	var out []*draw.Figure
	for _, f := range figureTable {
		out = append(out, drawFigure(v, f.id, wide)...)
	}
	return out
}

// file writes a file whole or not at all: under another name first.
func file(name string, write func(io.Writer) error) error {
	var b bytes.Buffer
	if err := write(&b); err != nil {
		return fmt.Errorf("report: %s: %w", name, err)
	}
	part := name + ".part"
	if err := os.WriteFile(part, b.Bytes(), 0o644); err != nil {
		return fmt.Errorf("report: %w", err)
	}
	if err := os.Rename(part, name); err != nil {
		return fmt.Errorf("report: %w", err)
	}
	return nil
}
