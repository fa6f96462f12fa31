package build

import (
	"os"
	"path/filepath"
)

// KeepModels names a folder that keeps the tables of device models between runs, "" for
// none. A file that is damaged, or made by other laws, is written again; one that cannot be
// read or written costs the time of filling the tables, no more.
func KeepModels(folder string) {
	models.Lock()
	defer models.Unlock()
	models.folder = folder
}

// modelFolder is such a folder.
type modelFolder string

func (f modelFolder) path(key string) string {
	return filepath.Join(string(f), "model-"+key+".tables")
}

// largestModel is more than any model's tables take.
const largestModel = 1 << 26

func (f modelFolder) Load(key string) []byte {
	if info, err := os.Stat(f.path(key)); err != nil || info.Size() > largestModel {
		return nil
	}
	data, err := os.ReadFile(f.path(key))
	if err != nil {
		return nil
	}
	return data
}

// Keep writes the file whole or not at all.
func (f modelFolder) Keep(key string, tables []byte) {
	if os.MkdirAll(string(f), 0o777) != nil {
		return
	}
	temp, err := os.CreateTemp(string(f), ".model-*")
	if err != nil {
		return
	}
	_, err = temp.Write(tables)
	if cerr := temp.Close(); err == nil {
		err = cerr
	}
	if err == nil {
		err = os.Rename(temp.Name(), f.path(key))
	}
	if err != nil {
		os.Remove(temp.Name())
	}
}
