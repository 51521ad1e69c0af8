package terminals

import (
	"bytes"
	"context"
	"encoding/hex"
	"io"
	"os"
	"sync"
	"testing"
	"time"

	"gaugelog/config"
	"gaugelog/simulators"
)

const busRig = `
specimen: {name: s, material: timber, section: {shape: rectangle, width: 40 mm, depth: 10 mm}, length: 1000 mm}
supports: [{name: l, at: 0 mm}, {name: r, at: 1000 mm}]
gauges:
  - {name: one, at: 500 mm, sense: down, resolution: 0.001 mm, port: "sim:bus", frame: registers, channel: "1"}
  - {name: two, at: 250 mm, sense: down, resolution: 0.001 mm, port: "sim:bus", frame: registers, channel: "2"}
  - {name: three, at: 300 mm, sense: down, resolution: 0.001 mm, port: "sim:query", frame: queried}
frames:
  - {name: registers, kind: modbus, unit: mm, timeout: 200 ms, modbus: {function: holding, register: 0, type: int16, scale: 0.001}}
  - {name: queried, kind: scpi, unit: mm, scpi: {query: "READ?"}}
loads: [{name: pan, at: 500 mm}]
plan: [{step: zero, hold: 1 h}]
`

// run plays a rig in real time until stop is called or the test ends.
func run(t *testing.T, rigText, faultText string) (sim *simulators.Sim, ports []Terminal, stop func()) {
	t.Helper()
	rig, err := config.Parse("rig.yaml", []byte(rigText))
	if err != nil {
		t.Fatal(err)
	}
	truth, err := simulators.ParseTruth("truth.yaml", []byte("specimen: {modulus: 10000 MPa}\nevery_gauge: {preset: 1.234 mm}\ngauges: [{name: two, preset: -2 mm}]\n"))
	if err != nil {
		t.Fatal(err)
	}
	faults, err := simulators.ParseFaults("faults.yaml", []byte(faultText))
	if err != nil {
		t.Fatal(err)
	}
	sim, err = simulators.New(simulators.Options{Rig: rig, Truth: truth, Faults: faults, Seed: 3, Asked: true})
	if err != nil {
		t.Fatal(err)
	}
	live, err := NewLive(sim)
	if err != nil {
		t.Skipf("no pseudo-terminals here: %v", err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	ended := make(chan error)
	go func() { ended <- live.Run(ctx) }()
	<-live.started
	stop = sync.OnceFunc(func() {
		cancel()
		if err := <-ended; err != nil {
			t.Error(err)
		}
		if err := live.Close(); err != nil {
			t.Error(err)
		}
	})
	t.Cleanup(stop)
	return sim, live.Terminals(), stop
}

// ask writes a request and reads as many bytes as the answer has.
func ask(t *testing.T, f *os.File, request, want string) {
	t.Helper()
	out, _ := hex.DecodeString(request)
	if _, err := f.Write(out); err != nil {
		t.Fatal(err)
	}
	expect(t, f, request, want)
}

func expect(t *testing.T, f *os.File, request, want string) {
	t.Helper()
	got := make([]byte, hex.DecodedLen(len(want)))
	if _, err := io.ReadFull(f, got); err != nil || hex.EncodeToString(got) != want {
		t.Errorf("%s: answered %x, %v; want %s", request, got, err, want)
	}
}

// The frames below were made by hand after the Modbus application protocol
// V1.1b3; 01 03 00 00 00 01 84 0A is a common example (from memory). 1.234 mm
// is 04D2, -2 mm is F830.
const callOne = "010300000001840a"

func crc(s string) string {
	raw, _ := hex.DecodeString(s)
	sum := uint16(0xFFFF)
	for _, c := range raw {
		for bit := range 8 {
			low := (sum ^ uint16(c)>>bit) & 1
			sum = sum>>1 ^ 0xA001*low
		}
	}
	return hex.EncodeToString(append(raw, byte(sum), byte(sum>>8)))
}

// TestBus asks two slaves on one line, one that is not there, and for what
// they do not have.
func TestBus(t *testing.T) {
	sim, ports, stop := run(t, busRig, "faults: []")
	bus := device(t, ports[0].Path)
	ask(t, bus, callOne, crc("01030204d2"))
	ask(t, bus, crc("020300000001"), crc("020302f830"))
	// Nobody is at 3; the answer that comes is that of 1.
	out, _ := hex.DecodeString(crc("030300000001"))
	if _, err := bus.Write(out); err != nil {
		t.Fatal(err)
	}
	ask(t, bus, callOne, crc("01030204d2"))
	ask(t, bus, crc("010300010001"), crc("018302"))
	ask(t, bus, crc("010600000001"), crc("018601"))
	ask(t, bus, crc("010400000001"), crc("018402"))
	query := device(t, ports[1].Path)
	ask(t, query, hex.EncodeToString([]byte("read?\r\n")), hex.EncodeToString([]byte("+1.2340000E+00\n")))
	ask(t, query, hex.EncodeToString([]byte("*IDN?\n")), hex.EncodeToString([]byte("SIMULATED,INDICATOR,0,1.0\n")))
	stop()
	if n := sim.Counts()[0].Intact; n != 2 {
		t.Errorf("the first slave's value was read %d times", n)
	}
}

// TestLateOnBus: while the answer of one slave is late, another answers; the
// late one comes after it.
func TestLateOnBus(t *testing.T) {
	sim, ports, stop := run(t, busRig, "faults: [{kind: late-reply, gauge: one, at: 0 s, for: 1 h, delay: 500 ms}]")
	bus := device(t, ports[0].Path)
	out, _ := hex.DecodeString(callOne)
	if _, err := bus.Write(out); err != nil {
		t.Fatal(err)
	}
	time.Sleep(50 * time.Millisecond)
	ask(t, bus, crc("020300000001"), crc("020302f830"))
	expect(t, bus, callOne, crc("01030204d2"))
	stop()
	if c := sim.Counts()[0]; c.Doubtful != 1 || c.Intact != 0 {
		t.Errorf("an answer beyond its time-out counts as %+v", c)
	}
}

// TestBenchLive opens the bench's ports and hears the multiplexer, which both
// rigs share, and asks a slave of each.
func TestBenchLive(t *testing.T) {
	joint, err := simulators.Bench(1, true, nil)
	if err != nil {
		t.Fatal(err)
	}
	live, err := NewLive(joint)
	if err != nil {
		t.Skipf("no pseudo-terminals here: %v", err)
	}
	ctx, cancel := context.WithCancel(context.Background())
	ended := make(chan error)
	go func() { ended <- live.Run(ctx) }()
	<-live.started
	for _, p := range live.Terminals() {
		switch p.Name {
		case "sim:multiplexer":
			f, heard := device(t, p.Path), []byte(nil)
			for !bytes.Contains(heard, []byte("C1+00")) || !bytes.Contains(heard, []byte("C2+00")) {
				b := make([]byte, 64)
				n, err := f.Read(b)
				if err != nil {
					t.Fatal(err)
				}
				heard = append(heard, b[:n]...)
			}
		case "sim:bus":
			f := device(t, p.Path)
			for _, address := range []string{"01", "02"} {
				out, _ := hex.DecodeString(crc(address + "0300100003"))
				if _, err := f.Write(out); err != nil {
					t.Fatal(err)
				}
				got := make([]byte, 11)
				if _, err := io.ReadFull(f, got); err != nil || crc(hex.EncodeToString(got[:9])) != hex.EncodeToString(got) || hex.EncodeToString(got[:3]) != address+"0306" {
					t.Errorf("slave %s: %x, %v", address, got, err)
				}
			}
		}
	}
	cancel()
	if err := <-ended; err != nil {
		t.Error(err)
	}
	if err := live.Close(); err != nil {
		t.Error(err)
	}
}
