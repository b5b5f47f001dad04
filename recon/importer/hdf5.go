package importer

import (
	"bytes"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// hdf5 tells HDF5 files, MAT-files of version 7.3 among them, from everything else. The page reads them with the HDF5
// library itself; here they are refused with the way around.
var hdf5 = Format{
	Name:       "HDF5",
	Extensions: []string{".h5", ".hdf5", ".mat"},
	Recognise: func(head []byte) bool {
		for at := 0; at < len(head); at = max(512, 2*at) {
			if bytes.HasPrefix(head[at:], []byte("\x89HDF\r\n\x1a\n")) {
				return true
			}
		}
		return len(head) >= matHeaderBytes && (string(head[124:128]) == "\x00\x02IM" ||
			string(head[124:128]) == "\x02\x00MI")
	},
	Read: func(string, []byte, Limits) ([]acquisition.Array, error) {
		return nil, fault.New(fault.Unsupported, "",
			"an HDF5 file (MAT-files of version 7.3 are HDF5 too); open it in the page and save the acquisition as .npz, or save it with MATLAB's -v7")
	},
}
