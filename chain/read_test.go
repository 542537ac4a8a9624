package chain_test

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"

	"midrail/chain"
	"midrail/signals/calibration"
)

// exact is how near a value read from decimal figures and a unit must lie to the one expected: some roundings of a
// float64, of 1.1e-16 each.
const exact = 1e-14

func near(t *testing.T, what string, got, want float64) {
	t.Helper()
	if !(math.Abs(got-want) <= exact*math.Abs(want)) {
		t.Errorf("%s = %v, want %v", what, got, want)
	}
}

func readFile(t testing.TB, name string) string {
	t.Helper()
	data, err := os.ReadFile(filepath.Join("..", "testdata", "chains", name))
	if err != nil {
		t.Fatal(err)
	}
	return string(data)
}

func mustRead(t testing.TB, text string, set ...string) *chain.Chain {
	t.Helper()
	c, err := chain.Read("test.toml", []byte(text), set)
	if err != nil {
		t.Fatalf("faults:\n%v", err)
	}
	return c
}

func faultsOf(t testing.TB, text string, set ...string) chain.Faults {
	t.Helper()
	c, err := chain.Read("test.toml", []byte(text), set)
	var faults chain.Faults
	if !errors.As(err, &faults) || len(faults) == 0 {
		t.Fatalf("got %v and no faults but %v", c, err)
	}
	if c != nil {
		t.Error("a chain came with its faults")
	}
	return faults
}

func TestStarterReads(t *testing.T) {
	c := mustRead(t, chain.Starter())
	if len(c.Warnings) > 0 {
		t.Errorf("the starter has warnings:\n%v", c.Warnings)
	}
	// What stands in comments as what else could be there must read, too.
	text := strings.NewReplacer("# buffer =", "buffer =", "# gain_bandwidth =", "gain_bandwidth =", "# [[interferer]]", "[[interferer]]",
		"# into =", "into =", "# frequency =", "frequency =", "# level =", "level =", "# shape =", "shape =").Replace(chain.Starter())
	c = mustRead(t, text)
	if len(c.Interferers) != 1 || c.Biases[0].Buffer != "dual" || c.Amplifiers[0].Model.GainBandwidth != 4e6 {
		t.Errorf("what the starter has in comments is %+v, %+v, %+v", c.Interferers, c.Biases, c.Amplifiers)
	}
}

func TestBroodBox(t *testing.T) {
	c := mustRead(t, readFile(t, "brood-box.toml"))
	if c.File != "test.toml" || c.Title != "Brood-box listener" || !strings.HasPrefix(c.Notes, "An electret") {
		t.Errorf("heading is %q, %q, %q", c.File, c.Title, c.Notes)
	}
	near(t, "supply", c.Supply.Voltage, 3.3)
	near(t, "temperature where none is given", c.Conditions.Temperature, 298.15)
	near(t, "noise_from where none is given", c.Conditions.NoiseFrom, 20)
	b := c.BiasNamed("half")
	if b == nil || b.Top.Value != 120e3 || b.Top.Ref != "R1" || b.Bypass == nil || b.Buffer != "" {
		t.Fatalf("bias is %+v", b)
	}
	near(t, "bypass", b.Bypass.Value, 10e-6)
	if a := c.AmplifierNamed("quad"); a == nil || a.Model.Class != "bipolar single-supply" || a.Model.GainBandwidth != 1e6 {
		t.Errorf("amplifier is %+v", a)
	}
	in := c.InputNamed("brood")
	if in == nil || in.Kind != chain.Electret || in.Channel != 1 || in.FullScaleUnit != "dBSPL" || in.SupplyFilter == nil {
		t.Fatalf("input is %+v", in)
	}
	// Levels by their definition, re 20 µPa (ISO 1683) and 1 V: 10^(dB/20).
	near(t, "full_scale", in.FullScale, 20e-6*1e5)
	near(t, "sensitivity", in.Sensitivity, math.Pow(10, -44./20))
	near(t, "self noise, 94 − 58 dB SPL", in.SelfNoise, 20e-6*math.Pow(10, 36./20))
	if !math.IsInf(in.OutputResistance, 1) || in.MinimumVoltage != 0 {
		t.Errorf("an electret without output_resistance has %v, without minimum_voltage %v", in.OutputResistance, in.MinimumVoltage)
	}
	s := c.StageNamed("capsule amp")
	if s == nil || s.Kind.Name != "inverting" || !reflect.DeepEqual(s.From, []string{"brood"}) || s.Amplifier != "quad" || s.Bias != "half" {
		t.Fatalf("stage is %+v", s)
	}
	if p, ok := s.Part("r_f"); !ok || p.Value != 180e3 || p.Ref != "R6" || p.Series != "E24" || p.Name != "capsule amp.r_f" || p.Unit != chain.Ohm {
		t.Errorf("r_f is %+v", p)
	}
	if _, ok := s.Part("r_x"); ok {
		t.Error("there is a part r_x")
	}
	near(t, "clock by divide", c.Converter.Rate, 125e3/13)
	near(t, "high", c.Converter.High, 1.8)
	if c.Converter.Bits != 10 || c.Converter.Low != 0 || c.Converter.HighIsSupply {
		t.Errorf("converter is %+v", c.Converter)
	}
	l := c.Limits
	if l.OverloadTime == nil || *l.OverloadTime != 0 || l.FoldBackBelowWanted == nil || *l.FoldBackBelowWanted != 40 || l.Droop == nil || *l.Droop != (chain.Droop{At: 3000, Max: 1}) {
		t.Errorf("limits are %+v", l)
	}
	if l.FoldBack != nil || l.Noise != nil || l.Interference != nil || l.Room != nil || l.Settling != nil {
		t.Errorf("limits that nobody set are %+v", l)
	}
	if c.StageNamed("x") != nil || c.InputNamed("x") != nil || c.BiasNamed("x") != nil || c.AmplifierNamed("x") != nil {
		t.Error("something is found under a name that nothing has")
	}
}

func TestEveryKeyIsRead(t *testing.T) {
	c := mustRead(t, readFile(t, "every-key.toml"))
	near(t, "temperature", c.Conditions.Temperature, 313.15)
	near(t, "noise_from", c.Conditions.NoiseFrom, 10)
	if want := (chain.Tolerance{Resistors: 0.005, Capacitors: 0.05, GainBandwidth: 0.2, Supply: 0.02, Normal: true}); c.Tolerance != want {
		t.Errorf("tolerance is %+v", c.Tolerance)
	}
	if c.Biases[0].Buffer != "own" {
		t.Errorf("bias is %+v", c.Biases[0])
	}
	// Each figure of the amplifier is another than its class's, so that none can be left behind.
	m := reflect.ValueOf(c.AmplifierNamed("own").Model)
	want := map[string]float64{
		"GainBandwidth": 8e6, "OpenLoopGain": 1e5, "SlewRate": 3e6, "SwingHigh": 1.2, "SwingLow": 1.1, "SwingLoad": 2e3,
		"OutputResistance": 50, "CurrentSource": 20e-3, "CurrentSink": 15e-3, "CommonModeHigh": 1.4, "CommonModeLow": 1.3,
		"Offset": -1e-3, "BiasCurrent": -100e-9, "NoiseVoltage": 6e-9, "NoiseVoltageCorner": 30, "NoiseCurrent": 0.5e-12, "NoiseCurrentCorner": 120,
		"PhaseMargin": 55, "SupplyRejection": 1e4, "SupplyRejectionCorner": 200,
	}
	for i := range m.NumField() {
		if name := m.Type().Field(i).Name; name != "Class" {
			near(t, name, m.Field(i).Float(), want[name])
		}
	}
	aux, capsule, module := c.InputNamed("aux"), c.InputNamed("capsule"), c.InputNamed("module")
	// 0 dBu is 1 mW in 600 Ω (IEC 60268).
	near(t, "+4 dBu", aux.FullScale, math.Sqrt(0.6)*math.Pow(10, 4./20))
	if aux.FullScaleUnit != "dBu" || aux.Channel != 0 || aux.SourceResistance != 150 {
		t.Errorf("line is %+v", aux)
	}
	near(t, "self_noise", capsule.SelfNoise, 20e-6*math.Pow(10, 30./20))
	near(t, "minimum_voltage", capsule.MinimumVoltage, 0.6)
	near(t, "current", capsule.Current, 0.3e-3)
	near(t, "supply_filter.c", capsule.SupplyFilter.C.Value, 47e-6)
	if capsule.OutputResistance != 15e3 || capsule.RatedLoad != 2200 || capsule.Load.Ref != "R10" || capsule.Load.Series != "E12" || capsule.SupplyFilter.R.Value != 1000 || capsule.SupplyFilter.C.Ref != "C10" {
		t.Errorf("electret is %+v", capsule)
	}
	near(t, "sensitivity", module.Sensitivity, 8e-3)
	near(t, "maximum_level", module.MaximumLevel, 20e-6*math.Pow(10, 124./20))
	near(t, "snr", module.SelfNoise, 20e-6*math.Pow(10, 30./20))
	if module.Channel != 2 || module.OutputResistance != 380 || module.Rest != 1.5 {
		t.Errorf("microphone is %+v", module)
	}
	if !math.IsInf(aux.MaximumLevel, 1) || !math.IsInf(capsule.MaximumLevel, 1) {
		t.Error("what has no maximum_level has one")
	}

	mix, twelve := c.StageNamed("mix of all"), c.StageNamed("twelve")
	if !reflect.DeepEqual(mix.From, []string{"one", "two"}) || len(mix.Legs) != 2 || mix.Legs[0].C == nil || mix.Legs[1].C != nil || mix.Legs[1].R.Ref != "R20" || mix.Legs[1].R.Name != "mix of all.two.r" {
		t.Errorf("summer is %+v", mix)
	}
	if !reflect.DeepEqual(twelve.From, []string{"eleven", "three"}) || twelve.Pick != "eleven" {
		t.Errorf("select is %+v", twelve)
	}
	if s := c.StageNamed("two"); s.Leg != "bias" || s.To != "" {
		t.Errorf("non-inverting is %+v", s)
	}
	if s := c.StageNamed("nine"); s.To != "bias" || s.Leg != "" {
		t.Errorf("rc high-pass is %+v", s)
	}
	if p, _ := c.StageNamed("eight").Part("c"); p.Value != 100e-9 {
		t.Errorf(`the capacitor code "104" is %v F`, p.Value)
	}
	seen := map[string]bool{}
	for _, s := range c.Stages {
		seen[s.Kind.Name] = true
	}
	for _, k := range chain.Kinds() {
		if !seen[k.Name] {
			t.Errorf("every-key.toml has no %s", k.Name)
		}
	}

	cv := c.Converter
	if !cv.HighIsSupply || cv.High != 9 || cv.Low != 0.5 || cv.Rate != 9615.38 || cv.SwitchResistance != 1000 || cv.SharesWith != "three" || cv.ENOB != 10.5 {
		t.Errorf("converter is %+v", cv)
	}
	near(t, "sampling_capacitor", cv.SamplingCapacitor, 14e-12)
	near(t, "acquisition", cv.Acquisition, 2e-6)
	near(t, "pin_capacitor", cv.PinCapacitor, 5e-12)
	near(t, "jitter", cv.Jitter, 1e-9)

	x := c.Interferers
	// 20 mVpp has a peak of 10 mV. A square's RMS is its peak. Noise is given as RMS.
	near(t, "sine", x[0].Level, 10e-3)
	near(t, "square", x[1].Level, 1e-3)
	near(t, "noise", x[2].Level, 20e-6*100)
	if x[0].Shape != "sine" || x[0].Into != "supply" || x[1].Frequency != 8000 || x[2].Frequency != 0 || x[2].Bandwidth != 20e3 {
		t.Errorf("interferers are %+v", x)
	}
	l := c.Limits
	for name, pair := range map[string][2]float64{
		"overload_time": {*l.OverloadTime, 1e-3}, "fold_back": {*l.FoldBack, -60}, "fold_back_below_wanted": {*l.FoldBackBelowWanted, 40},
		"interference": {*l.Interference, -70}, "noise": {*l.Noise, -65}, "room": {*l.Room, 3}, "settling": {*l.Settling, 5}, "droop.at": {l.Droop.At, 3e3}, "droop.max": {l.Droop.Max, 1},
	} {
		near(t, name, pair[0], pair[1])
	}
}

// A calibrated input has its full scale when the amplitude of its tone is known: the reading over it.
func TestCalibrate(t *testing.T) {
	text := readFile(t, "every-key.toml")
	for _, one := range []struct{ given, calibrate string }{
		{`full_scale = "+4dBu"`, `calibrate = { reading = "400mVpp", track = "cal.wav", from = "1s", to = 3 }`},
		{`full_scale = "110dBSPL"`, `calibrate = { reading = "94dBSPL", track = "cal.wav" }`},
	} {
		if !strings.Contains(text, one.given) {
			t.Fatalf("every-key.toml has no %s", one.given)
		}
		text = strings.Replace(text, one.given, one.calibrate, 1)
	}
	c := mustRead(t, text)
	aux, module := c.InputNamed("aux"), c.InputNamed("module")
	near(t, "aux reading", aux.Calibrate.Reading, 0.2/math.Sqrt2)
	near(t, "module reading", module.Calibrate.Reading, 20e-6*math.Pow(10, 94./20))
	if aux.Calibrate.Track != "cal.wav" || aux.Calibrate.From != 1 || aux.Calibrate.To != 3 || module.Calibrate.From != 0 || !math.IsInf(module.Calibrate.To, 1) || aux.FullScale != 0 || c.InputNamed("capsule").Calibrate != nil {
		t.Errorf("%+v, %+v", aux.Calibrate, module.Calibrate)
	}
	if err := errors.Join(c.SetFullScale(aux, calibration.Tone{Amplitude: 0.25}), c.SetFullScale(module, calibration.Tone{Amplitude: 0.1})); err != nil {
		t.Fatal(err)
	}
	near(t, "aux full_scale", aux.FullScale, 0.8/math.Sqrt2)
	near(t, "module full_scale", module.FullScale, 20e-6*math.Pow(10, 114./20))
	faults, ok := errors.AsType[chain.Faults](c.SetFullScale(aux, calibration.Tone{Amplitude: 1e6}))
	if !ok || len(faults) != 1 || faults[0].Pos != aux.Calibrate.Pos || !strings.Contains(faults[0].Error(), `input "aux", calibrate: the full scale is out of range, 1 µV RMS to 100 V RMS: the tone is at 120.00 dBFS; check the reading`) {
		t.Errorf("%v", faults)
	}
}

func TestLevelsOfASquareThatAreWrittenAsPeaks(t *testing.T) {
	text := readFile(t, "every-key.toml")
	c := mustRead(t, strings.Replace(text, `level = "1mVrms"`, `level = "1mVp"`, 1))
	near(t, "1mVp", c.Interferers[1].Level, 1e-3)
	c = mustRead(t, strings.Replace(text, `level = "20mVpp"`, `level = "20mVrms"`, 1))
	near(t, "a sine's 20mVrms", c.Interferers[0].Level, 20e-3*math.Sqrt2)
}

func TestParts(t *testing.T) {
	c := mustRead(t, readFile(t, "brood-box.toml"), "capsule amp.r_in = 10k", "half.top=150k")
	var got []string
	for _, p := range c.Parts() {
		got = append(got, p.Name)
	}
	want := []string{
		"half.top", "half.bottom", "half.bypass", "brood.load", "brood.supply_filter.r", "brood.supply_filter.c",
		"capsule amp.r_in", "capsule amp.c_in", "capsule amp.r_f", "capsule amp.c_f", "filter.r_1", "filter.r_2", "filter.c_1", "filter.c_2",
	}
	if !reflect.DeepEqual(got, want) {
		t.Errorf("parts are\n%q, want\n%q", got, want)
	}
	// Every part of the file comes, once, and in the file's order; its name is what --set takes.
	c = mustRead(t, readFile(t, "every-key.toml"))
	last, seen := chain.Pos{}, map[string]bool{}
	for _, p := range c.Parts() {
		if p.Pos.Line < last.Line || p.Pos.Line == last.Line && p.Pos.Column <= last.Column {
			t.Errorf("%s stands at %v, behind %v", p.Name, p.Pos, last)
		}
		last = p.Pos
		if seen[p.Name] {
			t.Errorf("%s comes twice", p.Name)
		}
		seen[p.Name] = true
		value := "33k"
		if p.Unit == chain.Farad {
			value = "33n"
		}
		changed := mustRead(t, readFile(t, "every-key.toml"), p.Name+"="+value)
		for _, q := range changed.Parts() {
			if want := map[chain.Unit]float64{chain.Ohm: 33e3, chain.Farad: 33e-9}[p.Unit]; q.Name == p.Name && (q.Value != want || q.Ref != p.Ref || q.Series != p.Series) {
				t.Errorf("set %s: it is %+v, was %+v", p.Name, q, p)
			}
		}
	}
	// 3 of the bias, 3 of the capsule, 3 legs' parts and 3 of passive legs, and those of the stages.
	stages := 0
	for i := range c.Stages {
		stages += len(c.Stages[i].Parts)
	}
	if len(seen) != 3+3+3+3+stages {
		t.Errorf("there are %d parts", len(seen))
	}
}

func TestSet(t *testing.T) {
	text := readFile(t, "every-key.toml")
	c := mustRead(t, text, "supply.voltage=5V", "converter.bits=16", "converter.enob=14", "converter.rate=16kHz", "half.top=150k", "own.slew_rate=1V/us", "mix of all.two.r=10k",
		"aux.channel=2", "twelve.pick=three", "mix of all.c_f = 68p", "limits.droop.at=2kHz", "capsule.load.series=E96", "six.r_1=1k", "six.r_1=2k", "module.channel=mix", "conditions.noise_from=1")
	if c.Supply.Voltage != 5 || c.Converter.High != 5 || c.Converter.Bits != 16 || c.Converter.ENOB != 14 || c.Converter.Rate != 16e3 || c.Biases[0].Top.Value != 150e3 {
		t.Errorf("supply %v, converter %+v, bias %+v", c.Supply, c.Converter, c.Biases[0])
	}
	if c.AmplifierNamed("own").Model.SlewRate != 1e6 || c.StageNamed("mix of all").Legs[1].R.Value != 10e3 || c.StageNamed("mix of all").Legs[1].R.Ref != "R20" {
		t.Error("an amplifier's figure or a leg's part is not as set")
	}
	if c.InputNamed("aux").Channel != 2 || c.InputNamed("module").Channel != 0 || c.StageNamed("twelve").Pick != "three" || c.Limits.Droop.At != 2000 || c.InputNamed("capsule").Load.Series != "E96" || c.Conditions.NoiseFrom != 1 {
		t.Error("a channel, a pick, a limit, a series or a condition is not as set")
	}
	if p, _ := c.StageNamed("six").Part("r_1"); p.Value != 2e3 {
		t.Errorf("of two that set one key the first won: %v", p.Value)
	}
	// A part that was not there takes its place in the order of its stage's parts.
	c = mustRead(t, readFile(t, "brood-box.toml"), "filter.r_a=10k", "filter.r_b=10k", "filter.bias=half")
	var keys []string
	for _, p := range c.StageNamed("filter").Parts {
		keys = append(keys, p.Key)
	}
	if got := strings.Join(keys, " "); got != "r_1 r_2 c_1 c_2 r_a r_b" {
		t.Errorf("parts are %s", got)
	}
}

func TestByteOrderMarkAndLineEnds(t *testing.T) {
	text := readFile(t, "every-key.toml")
	plain := mustRead(t, text)
	other := mustRead(t, "\ufeff"+strings.ReplaceAll(text, "\n", "\r\n"))
	other.Notes = strings.ReplaceAll(other.Notes, "\r\n", "\n")
	if !reflect.DeepEqual(plain, other) {
		t.Error("a byte order mark and CRLF change what is read")
	}
}
