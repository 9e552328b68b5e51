package roadfile

import (
	"encoding/binary"
	"encoding/json"
	"errors"
	"fmt"
	"hash/crc32"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strconv"

	"github.com/apache/arrow-go/v18/arrow"
	"github.com/apache/arrow-go/v18/arrow/array"
	"github.com/apache/arrow-go/v18/arrow/ipc"

	"leadline/network"
)

// Suffix is how the names of compiled road maps end.
const Suffix = ".roads.arrow"

// Names of the metadata in a compiled map's schema.
const (
	keyFormat      = "leadline:format"
	keyFingerprint = "leadline:fingerprint"
	keyChecksums   = "leadline:checksums"
	keyOriginLon   = "leadline:origin_lon_rad"
	keyOriginLat   = "leadline:origin_lat_rad"
	keyCellM       = "leadline:cell_m"
	keyCRS         = "leadline:crs"
	keySource      = "leadline:source"
	keyLicence     = "leadline:licence"
	keyNote        = "leadline:note"

	format = "roads/1"
)

// castagnoli is the polynomial that processors have an instruction for.
var castagnoli = crc32.MakeTable(crc32.Castagnoli)

// Write writes a compiled map. The file appears whole or not at all: it is
// written beside path under another name, flushed to the disk and renamed.
func Write(path string, m *network.Map) (err error) {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*")
	if err != nil {
		var system *fs.PathError
		if errors.As(err, &system) { // it names the file beside path
			err = system.Err
		}
		return fmt.Errorf("writing the road map %s: %w", path, err)
	}
	defer func() {
		if err != nil {
			f.Close()
			os.Remove(f.Name())
			err = fmt.Errorf("writing the road map %s: %w", path, err)
		}
	}()
	if err := WriteTo(f, m); err != nil {
		return err
	}
	// Temporary files are private; a map is as readable as others the user makes.
	if err := f.Chmod(0o644); err != nil {
		return err
	}
	if err := f.Sync(); err != nil {
		return err
	}
	if err := f.Close(); err != nil {
		return err
	}
	if err := os.Rename(f.Name(), path); err != nil {
		return err
	}
	return syncDir(filepath.Dir(path))
}

// syncDir makes a rename last through a power failure, where the system lets
// directories be synced.
func syncDir(dir string) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	defer d.Close()
	_ = d.Sync() // some file systems refuse; the rename itself has happened
	return nil
}

// WriteTo writes a compiled map to w.
func WriteTo(w io.Writer, m *network.Map) error {
	if err := checkEndian(); err != nil {
		return err
	}
	d := m.Data()
	fields, arrays := []arrow.Field{}, []arrow.Array{}
	for _, c := range columns {
		if c.optional != nil && c.optional(d) {
			continue
		}
		data := c.put(d)
		meta := map[string]string{"about": c.about}
		if c.name == "geometry" {
			crs, err := json.Marshal(map[string]string{"crs": wkt(d), "crs_type": "wkt2:2019"})
			if err != nil {
				return err
			}
			meta["ARROW:extension:name"] = "geoarrow.linestring"
			meta["ARROW:extension:metadata"] = string(crs)
		}
		fields = append(fields, arrow.Field{Name: c.name, Type: data.DataType(), Metadata: arrow.MetadataFrom(meta)})
		arrays = append(arrays, array.MakeFromData(data))
	}
	sums, err := json.Marshal(checksums(d, m.Fingerprint(), wkt(d)))
	if err != nil {
		return err
	}
	number := func(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) }
	meta := arrow.NewMetadata(
		[]string{keyFormat, keyFingerprint, keyChecksums, keyOriginLon, keyOriginLat, keyCellM, keyCRS, keySource, keyLicence, keyNote},
		[]string{format, m.Fingerprint(), string(sums), number(d.Origin.Lon), number(d.Origin.Lat), number(d.CellM), wkt(d), d.Source, d.Licence, d.Note},
	)
	schema := arrow.NewSchema(fields, &meta)
	out, err := ipc.NewFileWriter(w, ipc.WithSchema(schema))
	if err != nil {
		return err
	}
	if err := out.Write(array.NewRecordBatch(schema, arrays, int64(d.Charts()))); err != nil {
		return err
	}
	return out.Close()
}

// checksums returns the CRC-32C of each column and, under "metadata", of what
// is kept outside the columns.
func checksums(d *network.Data, fingerprint, crs string) map[string]string {
	sums := map[string]string{}
	d.EachColumn(func(name string, bytes []byte) {
		sums[name] = fmt.Sprintf("%08x", crc32.Checksum(bytes, castagnoli))
	})
	text := fmt.Sprintf("%s %q %x %x %x %q %q %q", fingerprint, crs, d.Origin.Lon, d.Origin.Lat, d.CellM, d.Source, d.Licence, d.Note)
	sums["metadata"] = fmt.Sprintf("%08x", crc32.Checksum([]byte(text), castagnoli))
	return sums
}

// wkt describes the map's frame in well-known text (ISO 19162:2019), for other
// programs.
func wkt(d *network.Data) string {
	lon, lat := d.Origin.Degrees()
	return fmt.Sprintf(`PROJCRS["Local transverse Mercator",BASEGEOGCRS["WGS 84",DATUM["World Geodetic System 1984",ELLIPSOID["WGS 84",6378137,298.257223563,LENGTHUNIT["metre",1]]],PRIMEM["Greenwich",0,ANGLEUNIT["degree",0.0174532925199433]]],CONVERSION["Local transverse Mercator",METHOD["Transverse Mercator",ID["EPSG",9807]],PARAMETER["Latitude of natural origin",%.17g,ANGLEUNIT["degree",0.0174532925199433],ID["EPSG",8801]],PARAMETER["Longitude of natural origin",%.17g,ANGLEUNIT["degree",0.0174532925199433],ID["EPSG",8802]],PARAMETER["Scale factor at natural origin",1,SCALEUNIT["unity",1],ID["EPSG",8805]],PARAMETER["False easting",0,LENGTHUNIT["metre",1],ID["EPSG",8806]],PARAMETER["False northing",0,LENGTHUNIT["metre",1],ID["EPSG",8807]]],CS[Cartesian,2],AXIS["easting (E)",east,ORDER[1]],AXIS["northing (N)",north,ORDER[2]],LENGTHUNIT["metre",1]]`, lat, lon)
}

// checkEndian refuses machines whose byte order is not that of the file:
// columns are used as they lie.
func checkEndian() error {
	var b [2]byte
	binary.NativeEndian.PutUint16(b[:], 1)
	if b[0] != 1 {
		return fmt.Errorf("compiled road maps are little-endian, this machine is not")
	}
	return nil
}
