package device

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
)

// ErrAmbiguous: an identity fits more than one device; the error wrapping it
// names them.
var ErrAmbiguous = errors.New("the identity fits more than one port")

// errBadName: a name that can never be a port's.
var errBadName = errors.New("is no name of a port")

// PortInfo describes one serial port of the machine.
type PortInfo struct {
	// Identity is the name to write in a rig file: usb:VID:PID:SERIAL where
	// that is unique, else by-path:NAME, else the device's path.
	Identity string
	// Path is the device node now; ByPath the stable name by place, if any.
	Path, ByPath string
	// What tells what it is, in words ("USB 0403:6001, serial number A10K3").
	What string
	// Vendor, Product and Serial are those of a USB device, lower-case hex.
	Vendor, Product, Serial string
	// HeldBy names the gaugelog process that holds the port, "" if none does.
	HeldBy string
}

// ListPorts lists the machine's serial ports from sysfs and the locks, sorted
// by path, without opening any. root stands for "/"; empty means "/". Ports
// that only exist as placeholders of the driver are left out.
func ListPorts(root, lockDir string) ([]PortInfo, error) {
	ports, err := scan(root)
	for i := range ports {
		ports[i].HeldBy = heldBy(lockDir, ports[i].Path)
	}
	return ports, err
}

// scan is ListPorts without the locks.
func scan(root string) ([]PortInfo, error) {
	dir := filepath.Join(rootOf(root), "sys/class/tty")
	entries, err := os.ReadDir(dir)
	if err != nil {
		return nil, fmt.Errorf("listing serial ports: %w", err)
	}
	byPath := byPathLinks(root)
	var ports []PortInfo
	for _, e := range entries {
		p, ok := inspect(root, e.Name())
		if !ok {
			continue
		}
		p.ByPath = byPath[e.Name()]
		ports = append(ports, p)
	}
	slices.SortFunc(ports, func(a, b PortInfo) int { return strings.Compare(a.Path, b.Path) })
	for i := range ports {
		ports[i].Identity = identityOf(ports, i)
	}
	return ports, nil
}

func rootOf(root string) string {
	if root == "" {
		return "/"
	}
	return root
}

// inspect reads one tty of sysfs; false for one without hardware behind it.
func inspect(root, name string) (PortInfo, bool) {
	dir := filepath.Join(rootOf(root), "sys/class/tty", name)
	device, err := filepath.EvalSymlinks(filepath.Join(dir, "device"))
	if err != nil {
		return PortInfo{}, false
	}
	if kind := attribute(dir, "type"); kind == "0" {
		return PortInfo{}, false // a UART the driver reserved and did not find
	}
	p := PortInfo{Path: filepath.Join(rootOf(root), "dev", name), What: "serial port"}
	stop, err := filepath.EvalSymlinks(filepath.Join(rootOf(root), "sys"))
	if err != nil {
		return p, true
	}
	for at := device; len(at) > len(stop); at = filepath.Dir(at) {
		if p.Vendor = attribute(at, "idVendor"); p.Vendor == "" {
			continue
		}
		p.Product, p.Serial = attribute(at, "idProduct"), attribute(at, "serial")
		p.What = fmt.Sprintf("USB %s:%s, no serial number", p.Vendor, p.Product)
		if p.Serial != "" {
			p.What = fmt.Sprintf("USB %s:%s, serial number %s", p.Vendor, p.Product, p.Serial)
		}
		break
	}
	return p, true
}

func attribute(dir, name string) string {
	b, err := os.ReadFile(filepath.Join(dir, name))
	if err != nil {
		return ""
	}
	return strings.TrimSpace(string(b))
}

// byPathLinks maps the names of device nodes to their links by place.
func byPathLinks(root string) map[string]string {
	dir := filepath.Join(rootOf(root), "dev/serial/by-path")
	links := map[string]string{}
	entries, _ := os.ReadDir(dir) // absent where no udev runs
	for _, e := range entries {
		to, err := os.Readlink(filepath.Join(dir, e.Name()))
		if err != nil {
			continue
		}
		// udev makes two links for some devices; the first by name counts.
		if _, taken := links[filepath.Base(to)]; !taken {
			links[filepath.Base(to)] = e.Name()
		}
	}
	return links
}

func identityOf(ports []PortInfo, i int) string {
	p := ports[i]
	if p.Serial != "" {
		same := 0
		for _, q := range ports {
			if q.Vendor == p.Vendor && q.Product == p.Product && q.Serial == p.Serial {
				same++
			}
		}
		if same == 1 {
			return fmt.Sprintf("usb:%s:%s:%s", p.Vendor, p.Product, p.Serial)
		}
	}
	if p.ByPath != "" {
		return "by-path:" + p.ByPath
	}
	return p.Path
}

// Resolve finds the device node a port's name means now: usb:VID:PID:SERIAL
// or usb:VID:PID (where only one such is plugged in), by-path:NAME, or the
// path of a node. It opens nothing. The error wraps fs.ErrNotExist where the
// device is not there and ErrAmbiguous where several fit.
func Resolve(root, name string) (string, error) {
	if rest, ok := strings.CutPrefix(name, "by-path:"); ok {
		path, err := filepath.EvalSymlinks(filepath.Join(rootOf(root), "dev/serial/by-path", filepath.Base(rest)))
		if err != nil {
			return "", fmt.Errorf("no port is plugged in at %s: %w", name, os.ErrNotExist)
		}
		return path, nil
	}
	rest, ok := strings.CutPrefix(name, "usb:")
	if !ok {
		if !filepath.IsAbs(name) && !strings.HasPrefix(name, "COM") {
			return "", fmt.Errorf("%q %w: write usb:VID:PID:SERIAL, by-path:NAME or the path of a device", name, errBadName)
		}
		return name, nil
	}
	parts := strings.SplitN(rest, ":", 3)
	if len(parts) < 2 || parts[0] == "" || parts[1] == "" {
		return "", fmt.Errorf("%q %w: write usb:VID:PID:SERIAL", name, errBadName)
	}
	ports, err := scan(root)
	if err != nil {
		return "", err
	}
	var found []PortInfo
	for _, p := range ports {
		if strings.EqualFold(p.Vendor, parts[0]) && strings.EqualFold(p.Product, parts[1]) &&
			(len(parts) < 3 || parts[2] == p.Serial) {
			found = append(found, p)
		}
	}
	switch len(found) {
	case 0:
		return "", fmt.Errorf("no port %s is plugged in: %w", name, os.ErrNotExist)
	case 1:
		return found[0].Path, nil
	}
	return "", fmt.Errorf("%s: %w: %s; name each by its place instead", name, ErrAmbiguous, candidates(found))
}

func candidates(found []PortInfo) string {
	var names []string
	for _, p := range found {
		name := p.Path
		if p.ByPath != "" {
			name = fmt.Sprintf("by-path:%s (now %s)", p.ByPath, p.Path)
		}
		names = append(names, name)
	}
	return strings.Join(names, " and ")
}
