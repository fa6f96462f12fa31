package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"

	"github.com/spf13/cobra"

	"kneepoint/config"
	"kneepoint/reports/build"
	"kneepoint/reports/causes"
	"kneepoint/reports/rehearse"
	"kneepoint/reports/text"
)

// The values of --calibrate.
const (
	calibrateAuto  = "auto"
	calibrateOff   = "off"
	calibrateAgain = "again"
)

// calibration is how many lots a calibration makes, and of which kind; tests make few.
var calibration rehearse.Options

// bindCalibrate gives a command the flag that says where the weights of causes come
// from.
func bindCalibrate(c *cobra.Command, mode *string) {
	usual := calibrateAuto
	if v := os.Getenv("KNEEPOINT_CALIBRATE"); v != "" {
		usual = v
	}
	c.Flags().StringVar(mode, "calibrate", usual,
		"calibration of causes: auto (kept from before, or made now), again (made now), off (usual weights)")
}

// newDiagnosis is what naming causes needs of a product, calibrated: by what comes
// with the program, by what an earlier run kept, or by made-up lots now. Where no lots
// of the product can be made, the usual weights stand in, and a warning says so.
func newDiagnosis(c *cobra.Command, p *config.Product, mode string) (*build.Diagnosis, error) {
	switch mode {
	case calibrateAuto, calibrateOff, calibrateAgain:
	default:
		return nil, fmt.Errorf("--calibrate %s: there is no such way; use auto, again or off", mode)
	}
	dir := cacheFolder()
	build.KeepModels(dir)
	if p == nil || mode == calibrateOff {
		return build.NewDiagnosis(p)
	}
	warn := func(format string, args ...any) {
		fmt.Fprintf(c.ErrOrStderr(), "warning: %s\n", text.Printable(fmt.Sprintf(format, args...)))
	}
	if mode == calibrateAuto {
		known := rehearse.Shipped(p)
		if known == nil && dir != "" {
			var err error
			if known, err = rehearse.Load(dir, p); err != nil {
				warn("%v; calibrating again", err)
			}
		}
		if known != nil {
			return rehearse.Diagnosis(p, known.Weights, known.Summary.Text())
		}
	}
	w, summary, err := calibrate(c, p, calibration)
	var bad *config.FileError
	switch {
	case errors.Is(err, context.Canceled) || errors.As(err, &bad):
		return nil, err
	case err != nil:
		warn("causes are not calibrated: %v", err)
		return build.NewDiagnosis(p)
	}
	if dir != "" {
		if err := rehearse.Store(dir, p, rehearse.NewCalibration(p, w, summary)); err != nil {
			warn("%s: the calibration cannot be kept: %v; KNEEPOINT_CACHE names another folder", dir, reason(err))
		}
	}
	return rehearse.Diagnosis(p, w, summary.Text())
}

// calibrate fits the weights on made-up lots and says so.
func calibrate(c *cobra.Command, p *config.Product, o rehearse.Options) (causes.Weights, rehearse.Summary, error) {
	lots := o.Lots
	if lots <= 0 {
		lots = rehearse.CalibrationLots
	}
	fmt.Fprintf(c.ErrOrStderr(), "hint: calibrating causes on %d made-up lots of %s, once for this product file; --calibrate=off goes without\n",
		lots, text.Printable(p.File))
	progress := newProgress(c, "calibrating")
	defer progress.end()
	o.Progress = func(done, total int) { progress.set(int64(done), int64(total)) }
	return rehearse.Calibrate(c.Context(), p, o)
}

// cacheFolder is where calibrations and device models are kept, "" for nowhere: what KNEEPOINT_CACHE
// names, or kneepoint's part of the user's cache folder. A service without a home, or
// with one that cannot be written to, has the folder of temporary files instead:
// better kept for a while than made for every lot.
func cacheFolder() string {
	switch dir := os.Getenv("KNEEPOINT_CACHE"); {
	case strings.EqualFold(dir, "off"):
		return ""
	case dir != "":
		return dir
	}
	if dir, err := os.UserCacheDir(); err == nil {
		dir = filepath.Join(dir, "kneepoint")
		if os.MkdirAll(dir, 0o700) == nil {
			return dir
		}
	}
	return filepath.Join(os.TempDir(), "kneepoint")
}
