package main

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"text/template"

	"github.com/spf13/cobra"

	"gaugelog/config"
)

// serviceFlags are the flags of `service`.
type serviceFlags struct {
	into, user, group, page, memory, to, tokenFile string
	udev                                           bool
}

func serviceCommand() *cobra.Command {
	var f serviceFlags
	c := &cobra.Command{
		Use:     "service RIG",
		GroupID: "prepare",
		Short:   "Prints a systemd unit (or a udev rule) that records a rig for ever",
		Long: `Prints a systemd unit that records a rig from boot on: started again after every
failure, watched by a watchdog that real progress feeds, with the least rights it
can do with. The run folder stays writable by the group, so that technicians can
enter marks. With --udev it prints a udev rule instead, which keeps other programs
off the rig's serial ports and opens them to the group. With --forward-to it prints
the unit that sends the run to a server.

Nothing is installed: look at what is printed, then put it where the first line says.`,
		Example: `  gaugelog service /etc/gaugelog/rig.yaml --into /srv/gaugelog/a3 | sudo tee /etc/systemd/system/gaugelog-a3.service
  gaugelog service /etc/gaugelog/rig.yaml --udev | sudo tee /etc/udev/rules.d/70-gaugelog.rules`,
		Args: cobra.ExactArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error { return runService(cmd, args[0], f) },
	}
	fl := c.Flags()
	fl.StringVar(&f.into, "into", "", "the run folder, a whole path")
	fl.StringVar(&f.user, "user", "gaugelog", "the user it runs as")
	fl.StringVar(&f.group, "group", "dialout", "the group that may enter marks and use the ports")
	fl.StringVar(&f.page, "page", "", "also serve the live page at this address, as `record --page` does")
	fl.StringVar(&f.memory, "memory", "256M", "the most memory it may take")
	fl.StringVar(&f.to, "forward-to", "", "print the unit that forwards the run to this write address")
	fl.StringVar(&f.tokenFile, "token-file", "", "with --forward-to: the file that holds the token")
	fl.BoolVar(&f.udev, "udev", false, "print the udev rule")
	return c
}

// unit is what the templates are filled with.
type unit struct {
	Name, Title, Program, Rig, Run, Parent, User, Group, Page, Memory, GoMemory, To, Token string
	Devices                                                                                []string
}

func runService(cmd *cobra.Command, rigFile string, f serviceFlags) error {
	rig, err := config.LoadRig(rigFile)
	if err != nil {
		return err
	}
	if f.udev {
		return printUdev(cmd, rig, f)
	}
	if !filepath.IsAbs(f.into) {
		return wrongf("give the run folder's whole path: --into /srv/gaugelog/NAME", "--into %q is no whole path", f.into)
	}
	for _, text := range []string{f.into, f.user, f.group, f.page, f.memory, f.to, f.tokenFile, rigFile} {
		if strings.ContainsAny(text, "\n\r\"'\\") {
			return wrongf("use plain names", "%q cannot stand in a unit", text)
		}
	}
	program, err := os.Executable()
	if err != nil {
		return err
	}
	if rigFile, err = filepath.Abs(rigFile); err != nil {
		return err
	}
	u := unit{Name: rig.Specimen.Name, Title: plainTitle(rig), Program: escaped(program), Rig: escaped(rigFile), Run: escaped(filepath.Clean(f.into)),
		Parent: escaped(filepath.Dir(filepath.Clean(f.into))), User: f.user, Group: f.group, Page: escaped(f.page), Memory: f.memory,
		To: escaped(f.to), Token: escaped(f.tokenFile), Devices: deviceClasses(rig)}
	if u.GoMemory, err = fourFifths(f.memory); err != nil {
		return err
	}
	if f.to != "" {
		return forwardUnit.Execute(cmd.OutOrStdout(), u)
	}
	return recordUnit.Execute(cmd.OutOrStdout(), u)
}

// escaped makes a text one word of ExecStart: percent signs and dollars mean
// something there.
func escaped(s string) string {
	s = strings.NewReplacer("%", "%%", "$", "$$").Replace(s)
	if strings.ContainsAny(s, " \t;&") {
		return `"` + s + `"`
	}
	return s
}

func plainTitle(rig *config.Rig) string {
	title := rig.Title
	if title == "" {
		title = rig.Specimen.Name
	}
	return strings.Join(strings.Fields(strings.ReplaceAll(title, "%", "%%")), " ")
}

// fourFifths is 80 % of a size such as 256M, for the garbage collector's limit.
func fourFifths(memory string) (string, error) {
	var n int
	var suffix string
	if _, err := fmt.Sscanf(memory, "%d%s", &n, &suffix); err != nil || n <= 0 || suffix != "M" && suffix != "G" {
		return "", wrongf("write 256M or 1G", "--memory %q is no size", memory)
	}
	if suffix == "G" {
		n *= 1024
	}
	return fmt.Sprintf("%dMiB", n*4/5), nil
}

// deviceClasses are the kinds of serial ports that the rig may come by. Rules
// by class outlive a plug that is pulled; rules by path do not.
func deviceClasses(rig *config.Rig) []string {
	classes := []string{"char-ttyUSB", "char-ttyACM"}
	for _, p := range portsOf(rig) {
		for prefix, class := range map[string]string{"/dev/ttyAMA": "char-ttyAMA", "/dev/ttyS": "char-ttyS", "/dev/serial0": "char-ttyAMA", "/dev/serial1": "char-ttyS"} {
			if strings.HasPrefix(p, prefix) && !slices.Contains(classes, class) {
				classes = append(classes, class)
			}
		}
	}
	slices.Sort(classes)
	return classes
}

// portsOf lists the rig's ports, each once.
func portsOf(rig *config.Rig) []string {
	var all []string
	for _, g := range rig.Gauges {
		all = append(all, g.Port)
	}
	for _, p := range rig.Probes {
		all = append(all, p.Port)
	}
	slices.Sort(all)
	return slices.DeleteFunc(slices.Compact(all), func(p string) bool { return p == "" })
}

// printUdev prints a rule for each port of this machine that the rig names.
func printUdev(cmd *cobra.Command, rig *config.Rig, f serviceFlags) error {
	var rules, notes []string
	for _, p := range portsOf(rig) {
		match, why := udevMatch(p)
		if why != "" {
			notes = append(notes, fmt.Sprintf("# %q %s: no rule", p, why))
			continue
		}
		rules = append(rules, fmt.Sprintf(`SUBSYSTEM=="tty", %s, GROUP="%s", MODE="0660", ENV{ID_MM_DEVICE_IGNORE}="1", ENV{ID_MM_PORT_IGNORE}="1", ENV{BRLTTY_BRAILLE_DRIVER}=""`, match, f.group))
	}
	if len(rules) == 0 {
		return wrongf("name ports as `gaugelog ports` prints them", "the rig names no serial port of this machine")
	}
	fmt.Fprintf(cmd.OutOrStdout(), `# /etc/udev/rules.d/70-gaugelog.rules for %s; then: udevadm control --reload && udevadm trigger
# No program but the recorder opens these ports: modem and braille services probe new ones.
%s
`, plainTitle(rig), strings.Join(append(notes, rules...), "\n"))
	return nil
}

// udevMatch is what a port is recognised by in a rule: a USB identity by its
// adapter, a link below /dev/serial by the name that 60-serial.rules gave it, a
// device by its own; or why it cannot be.
func udevMatch(port string) (match, why string) {
	usb, isUSB := strings.CutPrefix(port, "usb:")
	parts := strings.SplitN(usb, ":", 3)
	device, isDevice := strings.CutPrefix(port, "/dev/")
	switch {
	case strings.ContainsAny(port, "\"\n\\*?[|"):
		return "", "has signs that mean something in a rule"
	case isUSB && len(parts) == 3:
		return fmt.Sprintf(`ATTRS{idVendor}=="%s", ATTRS{idProduct}=="%s", ATTRS{serial}=="%s"`, parts[0], parts[1], parts[2]), ""
	case isUSB && len(parts) == 2:
		return fmt.Sprintf(`ATTRS{idVendor}=="%s", ATTRS{idProduct}=="%s"`, parts[0], parts[1]), ""
	case isUSB:
		return "", "names no adapter"
	case isDevice && strings.HasPrefix(device, "serial/"):
		return fmt.Sprintf(`SYMLINK=="%s"`, device), ""
	case isDevice && strings.HasPrefix(device, "tty"):
		return fmt.Sprintf(`KERNEL=="%s"`, device), ""
	}
	return "", "is no serial port by its name"
}

// hardening is what both units have: the least rights. ProtectClock is left
// out on purpose: it forbids even to read whether the clock is synchronised.
const hardening = `User={{.User}}
Group={{.Group}}
UMask=0002
NoNewPrivileges=yes
CapabilityBoundingSet=
AmbientCapabilities=
ProtectSystem=strict
ProtectHome=yes
PrivateTmp=yes
ProtectKernelTunables=yes
ProtectKernelModules=yes
ProtectKernelLogs=yes
ProtectControlGroups=yes
ProtectHostname=yes
ProtectProc=invisible
RestrictNamespaces=yes
RestrictRealtime=yes
RestrictSUIDSGID=yes
LockPersonality=yes
MemoryDenyWriteExecute=yes
SystemCallArchitectures=native
SystemCallFilter=@system-service adjtimex clock_adjtime
SystemCallErrorNumber=EPERM
LimitNOFILE=1024
MemoryMax={{.Memory}}
Environment=GOMEMLIMIT={{.GoMemory}}
Restart=always
RestartSec=2
TimeoutStopSec=20
ReadWritePaths={{.Parent}}
`

var recordUnit = template.Must(template.New("record").Parse(`# /etc/systemd/system/gaugelog-{{.Name}}.service
# Before: adduser --system --group --no-create-home {{.User}}; usermod -aG {{.Group}} {{.User}}
#         install -d -o {{.User}} -g {{.Group}} -m 2775 {{.Parent}}
# Then:   systemctl daemon-reload && systemctl enable --now gaugelog-{{.Name}}
[Unit]
Description=gaugelog records {{.Title}}
Documentation=man:gaugelog-record(1)
After=local-fs.target
RequiresMountsFor={{.Parent}}
StartLimitIntervalSec=0

[Service]
Type=notify
NotifyAccess=main
WatchdogSec=30
ExecStart={{.Program}} record {{.Rig}} --into {{.Run}} --quiet{{if .Page}} --page {{.Page}}{{end}}
OOMScoreAdjust=-500
SupplementaryGroups=dialout
DevicePolicy=closed
{{range .Devices}}DeviceAllow={{.}} rw
{{end}}RestrictAddressFamilies=AF_INET AF_INET6 AF_UNIX AF_NETLINK
` + hardening + `
[Install]
WantedBy=multi-user.target
`))

var forwardUnit = template.Must(template.New("forward").Parse(`# /etc/systemd/system/gaugelog-{{.Name}}-forward.service
# Then: systemctl daemon-reload && systemctl enable --now gaugelog-{{.Name}}-forward
[Unit]
Description=gaugelog forwards {{.Title}}
Documentation=man:gaugelog-forward(1)
Wants=network-online.target
After=network-online.target gaugelog-{{.Name}}.service
RequiresMountsFor={{.Parent}}
StartLimitIntervalSec=0

[Service]
Type=exec
ExecStart={{.Program}} forward {{.Run}} --to {{.To}} --follow{{if .Token}} --token-file ${CREDENTIALS_DIRECTORY}/token
LoadCredential=token:{{.Token}}{{end}}
PrivateDevices=yes
RestrictAddressFamilies=AF_INET AF_INET6 AF_UNIX
` + hardening + `
[Install]
WantedBy=multi-user.target
`))
