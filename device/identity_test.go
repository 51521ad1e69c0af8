package device_test

import (
	"errors"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"gaugelog/config"
	"gaugelog/device"
)

// tree is a machine's /sys and /dev, as far as serial ports show there.
type tree struct {
	t    *testing.T
	root string
}

func newTree(t *testing.T) tree {
	t.Helper()
	if runtime.GOOS == "windows" {
		t.Skip("needs symbolic links")
	}
	root := t.TempDir()
	for _, dir := range []string{"sys/class/tty", "sys/devices", "dev/serial/by-path"} {
		os.MkdirAll(filepath.Join(root, dir), 0o755)
	}
	return tree{t, root}
}

func (r tree) write(path, text string) {
	r.t.Helper()
	path = filepath.Join(r.root, path)
	os.MkdirAll(filepath.Dir(path), 0o755)
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		r.t.Fatal(err)
	}
}

// usb plugs an adapter into a USB place ("1-1.2") as the node name.
func (r tree) usb(name, place, vendor, product, serial string) {
	r.t.Helper()
	dev := "sys/devices/pci0/usb1/" + place
	r.write(dev+"/idVendor", vendor+"\n")
	r.write(dev+"/idProduct", product+"\n")
	if serial != "" {
		r.write(dev+"/serial", serial+"\n")
	}
	port := dev + "/" + place + ":1.0/" + name
	r.write(port+"/tty/"+name+"/dev", "188:0\n")
	r.write("dev/"+name, "")
	os.Symlink(filepath.Join(r.root, port), filepath.Join(r.root, port, "tty", name, "device"))
	os.Symlink(filepath.Join(r.root, port, "tty", name), filepath.Join(r.root, "sys/class/tty", name))
	os.Symlink("../../"+name, filepath.Join(r.root, "dev/serial/by-path", "pci-0-usb-"+place+":1.0-port0"))
}

func (r tree) unplug(name, place string) {
	os.RemoveAll(filepath.Join(r.root, "sys/class/tty", name))
	os.RemoveAll(filepath.Join(r.root, "sys/devices/pci0/usb1", place))
	os.RemoveAll(filepath.Join(r.root, "dev", name))
	os.RemoveAll(filepath.Join(r.root, "dev/serial/by-path", "pci-0-usb-"+place+":1.0-port0"))
}

// uart adds an on-board port; kind 0 is one the driver reserved in vain.
func (r tree) uart(name, kind string) {
	r.write("sys/devices/platform/serial/"+name+"/x", "")
	r.write("sys/class/tty/"+name+"/type", kind+"\n")
	os.Symlink(filepath.Join(r.root, "sys/devices/platform/serial", name), filepath.Join(r.root, "sys/class/tty", name, "device"))
	r.write("dev/"+name, "")
}

func TestListPorts(t *testing.T) {
	r := newTree(t)
	r.usb("ttyUSB0", "1-1.1", "0403", "6001", "A10K3")
	r.usb("ttyUSB1", "1-1.2", "1a86", "7523", "")
	r.usb("ttyUSB2", "1-1.3", "1a86", "7523", "")
	r.uart("ttyS0", "4")
	r.uart("ttyS1", "0")
	r.write("sys/class/tty/tty0/dev", "4:0\n") // a console has no device link
	ports, err := device.ListPorts(r.root, t.TempDir())
	if err != nil {
		t.Fatal(err)
	}
	var got []string
	for _, p := range ports {
		got = append(got, filepath.Base(p.Path)+" "+strings.TrimPrefix(p.Identity, r.root)+" "+p.What)
	}
	want := []string{
		"ttyS0 /dev/ttyS0 serial port",
		"ttyUSB0 usb:0403:6001:A10K3 USB 0403:6001, serial number A10K3",
		"ttyUSB1 by-path:pci-0-usb-1-1.2:1.0-port0 USB 1a86:7523, no serial number",
		"ttyUSB2 by-path:pci-0-usb-1-1.3:1.0-port0 USB 1a86:7523, no serial number",
	}
	if strings.Join(got, "\n") != strings.Join(want, "\n") {
		t.Errorf("got\n%s\nwant\n%s", strings.Join(got, "\n"), strings.Join(want, "\n"))
	}
	for _, p := range ports {
		if path, err := device.Resolve(r.root, p.Identity); p.Identity != p.Path && (err != nil || path != p.Path) {
			t.Errorf("%s resolves to %s, %v; listed at %s", p.Identity, path, err, p.Path)
		}
	}
}

// Row 2: the identity follows the device to its new name.
func TestIdentityFollowsDevice(t *testing.T) {
	r := newTree(t)
	const id = "usb:0403:6001:A10K3"
	if _, err := device.Resolve(r.root, id); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("before it is plugged in: %v", err)
	}
	for _, name := range []string{"ttyUSB0", "ttyUSB1"} {
		r.usb(name, "1-1.1", "0403", "6001", "A10K3")
		if path, err := device.Resolve(r.root, id); err != nil || filepath.Base(path) != name {
			t.Errorf("%s, %v", path, err)
		}
		r.unplug(name, "1-1.1")
	}
}

// Row 3: two adapters that cannot be told apart are refused, both named, and
// a bank does not start on them.
func TestAmbiguousIdentity(t *testing.T) {
	for _, serial := range []string{"", "0001"} {
		r := newTree(t)
		r.usb("ttyUSB0", "1-1.1", "1a86", "7523", serial)
		r.usb("ttyUSB1", "1-1.2", "1a86", "7523", serial)
		id := strings.TrimSuffix("usb:1a86:7523:"+serial, ":")
		_, err := device.Resolve(r.root, id)
		if !errors.Is(err, device.ErrAmbiguous) || !strings.Contains(err.Error(), "by-path:pci-0-usb-1-1.1:1.0-port0") ||
			!strings.Contains(err.Error(), "by-path:pci-0-usb-1-1.2:1.0-port0") {
			t.Errorf("serial %q: %v", serial, err)
		}
		test := rig(1, signed)
		test.Gauges[0].Port = id
		var l log
		if _, err := device.Open(device.Options{Rigs: []*config.Rig{test}, Sink: &l, Opener: device.SystemOpener{Root: r.root}}); !errors.Is(err, device.ErrAmbiguous) {
			t.Errorf("Open: %v", err)
		}
		if path, err := device.Resolve(r.root, "by-path:pci-0-usb-1-1.2:1.0-port0"); err != nil || filepath.Base(path) != "ttyUSB1" {
			t.Errorf("by-path: %s, %v", path, err)
		}
	}
}

func TestBadNames(t *testing.T) {
	r := newTree(t)
	for _, name := range []string{"ttyUSB0", "usb:", "usb:0403", "usb::6001:A", ""} {
		if _, err := device.Resolve(r.root, name); err == nil || errors.Is(err, fs.ErrNotExist) {
			t.Errorf("%q: %v", name, err)
		}
	}
}

// What cannot work is refused before anything is opened, with its place.
func TestOpenRefuses(t *testing.T) {
	tests := []struct {
		change func(*config.Rig)
		want   string
	}{
		{func(r *config.Rig) { r.Gauges[0].Port = "" }, "gauge g0: no port"},
		{func(r *config.Rig) { r.Gauges[0].Frame = "nowhere" }, `gauge g0: frame "nowhere"`},
		{func(r *config.Rig) { r.Gauges[1].Port = "/dev/p0" }, "gauge g1: port /dev/p0 channel \"\" already feeds gauge g0"},
		{func(r *config.Rig) {
			r.Gauges[1].Port = "/dev/p0"
			r.Gauges[1].Channel = "2"
			r.Gauges[1].Line = &config.Line{Baud: 300}
		}, "already used at"},
		{func(r *config.Rig) { r.Frames[0].Pattern = `(?P<temp>\d)` }, "group value"},
		{func(r *config.Rig) { r.Frames[0].End = "" }, "needs an end"},
		{func(r *config.Rig) { r.Frames[0].Request = `\q` }, "bad escape"},
		{func(r *config.Rig) { r.Frames[0].Statuses = map[string]string{"H": "held"} }, "held"},
		{func(r *config.Rig) { r.Frames[0].Kind = "picture" }, "picture"},
		{func(r *config.Rig) { r.Gauges[0].Port = "mid" }, "is no name of a port"},
	}
	for _, tt := range tests {
		r := rig(2, signed)
		r.Gauges[0].Port, r.Gauges[1].Port = "/dev/p0", "/dev/p1"
		tt.change(r)
		_, err := device.Open(device.Options{Rigs: []*config.Rig{r}, Sink: &log{}})
		if err == nil || !strings.Contains(err.Error(), tt.want) {
			t.Errorf("%v, want %q", err, tt.want)
		}
	}
}
