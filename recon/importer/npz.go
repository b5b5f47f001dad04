package importer

import (
	"archive/zip"
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"strings"

	"torrloom/recon/acquisition"
	"torrloom/recon/fault"
)

// numpyArchive is a ZIP archive of NPY members, as numpy.savez and numpy.savez_compressed write it.
var numpyArchive = Format{
	Name:       "NumPy archive",
	Extensions: []string{".npz"},
	Recognise: func(head []byte) bool {
		return bytes.HasPrefix(head, []byte(zipEnd)) || strings.HasSuffix(firstMember(head), ".npy")
	},
	Read:    readNPZ,
	Salvage: salvageNPZ,
}

// zipArchive is a ZIP archive of files of the other formats.
var zipArchive = Format{
	Name:       "ZIP archive",
	Extensions: []string{".zip"},
	Recognise:  func(head []byte) bool { return bytes.HasPrefix(head, []byte(zipMember)) },
	Unpack:     unpackZIP,
}

// zipMember begins every member of a ZIP archive.
// Source: PKWARE, .ZIP File Format Specification (APPNOTE 6.3), 4.3.7.
const zipMember = "PK\x03\x04"

// firstMember returns the name of the first member of an archive that begins with head.
func firstMember(head []byte) string {
	const lengthAt, nameAt = 26, 30
	if !bytes.HasPrefix(head, []byte(zipMember)) || len(head) < nameAt {
		return ""
	}
	end := nameAt + int(binary.LittleEndian.Uint16(head[lengthAt:]))
	return string(head[nameAt:min(end, len(head))])
}

func unpackZIP(_ string, data []byte, limits Limits) ([]File, error) {
	archive, err := openZIP(data)
	if err != nil {
		return nil, err
	}
	if err := checkMembers(archive.File, int64(len(data)), limits); err != nil {
		return nil, err
	}
	var files []File
	for _, member := range archive.File {
		if hidden(member.Name) {
			continue
		}
		data, err := unpack(member)
		if err != nil {
			return nil, fault.Within(member.Name, err)
		}
		files = append(files, File{member.Name, data})
	}
	return files, nil
}

// zipEnd begins the record that closes a ZIP archive; an archive without members begins with it.
// Source: PKWARE, .ZIP File Format Specification (APPNOTE 6.3), 4.3.16.
const zipEnd = "PK\x05\x06"

func readNPZ(_ string, data []byte, limits Limits) ([]acquisition.Array, error) {
	archive, err := openZIP(data)
	if err != nil {
		return nil, err
	}
	if err := checkMembers(archive.File, int64(len(data)), limits); err != nil {
		return nil, err
	}
	var arrays []acquisition.Array
	for _, member := range archive.File {
		array, err := readMember(member, limits)
		if err != nil {
			return nil, fault.Within(memberName(member), err)
		}
		array.Name = memberName(member)
		arrays = append(arrays, array)
	}
	return arrays, nil
}

// openZIP reads the directory of an archive that ends with the last byte of data.
func openZIP(data []byte) (*zip.Reader, error) {
	archive, err := zip.NewReader(bytes.NewReader(data), int64(len(data)))
	if err != nil {
		return nil, fault.New(fault.BadFile, fmt.Sprintf("byte %d", len(data)),
			"ends without a readable directory of members (%v); the file may be cut short", err)
	}
	const endBytes = 22 // length of the closing record without its comment
	end := len(data) - endBytes - len(archive.Comment)
	if end < 0 || !bytes.HasPrefix(data[end:], []byte(zipEnd)) {
		return nil, fault.New(fault.BadFile, "", "bytes follow the end of the archive; it may be damaged or two files in one")
	}
	return archive, nil
}

// memberName returns the name of the array in a member: without the extension that NumPy adds.
func memberName(member *zip.File) string { return strings.TrimSuffix(member.Name, ".npy") }

// checkMembers looks at the directory alone, before anything is unpacked.
func checkMembers(members []*zip.File, archive int64, limits Limits) error {
	if err := limits.checkMembers(len(members)); err != nil {
		return err
	}
	seen := map[string]bool{}
	var stated []uint64
	for _, m := range members {
		if seen[memberName(m)] {
			return fault.New(fault.BadFile, memberName(m), "stands in the archive twice; each name may stand once")
		}
		seen[memberName(m)] = true
		stated = append(stated, m.UncompressedSize64)
		const encrypted = 1 // bit of the general purpose flags
		if m.Flags&encrypted != 0 {
			return fault.New(fault.Unsupported, memberName(m), "is encrypted; save it without a password")
		}
		if m.Method != zip.Store && m.Method != zip.Deflate {
			return fault.New(fault.Unsupported, memberName(m),
				"is packed by ZIP method %d; use numpy.savez or numpy.savez_compressed", m.Method)
		}
	}
	return limits.checkUnpacked(stated, archive)
}

// readMember returns the array of one member. A member that does not call itself NPY is handed over as its bytes, as
// NumPy does.
func readMember(member *zip.File, limits Limits) (acquisition.Array, error) {
	data, err := unpack(member)
	if err != nil {
		return acquisition.Array{}, err
	}
	if strings.HasSuffix(member.Name, ".npy") {
		return parseNPY(data, limits)
	}
	layout := acquisition.Layout{Kind: acquisition.Uint, Size: 1}
	return acquisition.NewArray("", []int{len(data)}, layout, data)
}

// unpack returns the bytes of a member, whose stated size has been checked against the limits.
func unpack(member *zip.File) ([]byte, error) {
	start, _ := member.DataOffset() // zero when unknown; it only says where to look
	where := fmt.Sprintf("byte %d", start)
	from, err := member.Open()
	if err != nil {
		return nil, fault.New(fault.BadFile, where, "cannot be unpacked (%v); the archive may be damaged", err)
	}
	defer from.Close()
	data := make([]byte, member.UncompressedSize64)
	if _, err := io.ReadFull(from, data); err != nil {
		return nil, fault.New(fault.BadFile, where,
			"does not unpack to the %d bytes stated (%v); the archive may be damaged", len(data), err)
	}
	// The checksum is compared when the end is read; a byte more than stated is a fault too.
	if n, err := from.Read(make([]byte, 1)); n != 0 || !errors.Is(err, io.EOF) {
		return nil, fault.New(fault.BadFile, where,
			"unpacks to something else than stated (%d bytes and checksum %08x); the archive may be damaged",
			len(data), member.CRC32)
	}
	return data, nil
}
