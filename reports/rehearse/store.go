package rehearse

import (
	"bytes"
	"crypto/sha256"
	_ "embed"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"math"
	"os"
	"path/filepath"

	"kneepoint/config"
	"kneepoint/reports/causes"
)

// calibrationVersion is raised when weights of the same catalogue come to mean
// something else: another way to look at lots, to weigh, to make them or to fit.
const calibrationVersion = 2

// Calibration is what a calibration found, as it is kept in a file.
type Calibration struct {
	Tool    string         `json:"tool"`    // Version when it was made
	Product string         `json:"product"` // SHA-256 of the product file
	Weights causes.Weights `json:"weights"`
	Summary Summary        `json:"summary"`
}

// Version is the hash of all that a calibration depends on beside the product: the
// built-in catalogue, the weights that fitting starts from and the way it is done.
func Version() string {
	data, err := json.Marshal(struct {
		Version   int
		Lots      int
		Catalogue *causes.Catalogue
		Usual     causes.Weights
	}{calibrationVersion, CalibrationLots, causes.Default(), causes.UsualWeights()})
	if err != nil {
		panic(err) // a catalogue that was parsed can be written
	}
	sum := sha256.Sum256(data)
	return hex.EncodeToString(sum[:8])
}

// NewCalibration puts what [Calibrate] found into the form that is kept.
func NewCalibration(p *config.Product, w causes.Weights, s Summary) *Calibration {
	return &Calibration{Tool: Version(), Product: p.SHA256, Weights: w, Summary: s}
}

//go:generate go test . -run TestShipped -update

// shipped is the calibration of the demo's product. The test that writes it also holds
// it to this version.
//
//go:embed demo-calibration.json
var shipped []byte

// Shipped returns the calibration that comes with the program, when there is one for
// the product, else nil.
func Shipped(p *config.Product) *Calibration {
	c, err := decode(shipped)
	if err != nil || c.fits(p) != nil {
		return nil
	}
	return c
}

// Stored is where a folder keeps the calibration of a product.
func Stored(dir string, p *config.Product) string {
	return filepath.Join(dir, "calibration-"+p.SHA256[:min(len(p.SHA256), 24)]+".json")
}

// Load reads a product's calibration from a folder: nil without an error when there is
// none. The error says why a file that is there cannot be used; it can be
// written again.
func Load(dir string, p *config.Product) (*Calibration, error) {
	path := Stored(dir, p)
	data, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	c, err := decode(data)
	if err == nil {
		err = c.fits(p)
	}
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return c, nil
}

func decode(data []byte) (*Calibration, error) {
	var c Calibration
	d := json.NewDecoder(bytes.NewReader(data))
	d.DisallowUnknownFields()
	if err := d.Decode(&c); err != nil {
		return nil, fmt.Errorf("is no calibration: %w", err)
	}
	return &c, nil
}

// fits says why a calibration is not one of this program and product.
func (c *Calibration) fits(p *config.Product) error {
	switch {
	case c.Tool != Version():
		return errors.New("was made by another version")
	case c.Product != p.SHA256:
		return errors.New("is of another product file")
	}
	for _, w := range c.Weights.View {
		if !(w > 0) || math.IsInf(w, 0) {
			return fmt.Errorf("has a weight of %v", w)
		}
	}
	for _, w := range []float64{c.Weights.Nothing, c.Weights.Unknown, c.Weights.Pair} {
		if math.IsNaN(w) || math.IsInf(w, 0) {
			return fmt.Errorf("has log odds of %v", w)
		}
	}
	return nil
}

// Write is the calibration as JSON.
func (c *Calibration) Write() ([]byte, error) {
	data, err := json.MarshalIndent(c, "", " ")
	if err != nil {
		return nil, err
	}
	return append(data, '\n'), nil
}

// Store writes a calibration into a folder, making it when it is not there. The file
// appears whole or not at all.
func Store(dir string, p *config.Product, c *Calibration) error {
	data, err := c.Write()
	if err != nil {
		return err
	}
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return err
	}
	temp, err := os.CreateTemp(dir, ".calibration-*")
	if err != nil {
		return err
	}
	_, err = temp.Write(data)
	if cerr := temp.Close(); err == nil {
		err = cerr
	}
	if err == nil {
		err = os.Rename(temp.Name(), Stored(dir, p))
	}
	if err != nil {
		os.Remove(temp.Name())
	}
	return err
}
