package chain_test

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"unicode/utf8"

	"pgregory.net/rapid"

	"midrail/chain"
)

// marked strips the marks § from a text and returns the places that they stood at, in order.
func marked(text string) (plain string, at []chain.Pos) {
	for i, line := range strings.Split(text, "\n") {
		for n, before := 0, line; strings.Contains(before, "§"); n++ {
			head, rest, _ := strings.Cut(before, "§")
			at = append(at, chain.Pos{Line: i + 1, Column: utf8.RuneCountInString(head) + 1})
			before = head + rest
		}
	}
	return strings.ReplaceAll(text, "§", ""), at
}

// whole is a chain file without fault that the cases below break; § in what they put there marks a fault's place.
const whole = `title = "Test"

[supply]
voltage = "5V"

[bias.half]
top = "100k"
bottom = "100k"
bypass = "10u"

[amplifier.dual]
class = "cmos rail-to-rail"

[input.capsule]
kind = "electret"
sensitivity = "-42dBV/Pa"
rated_load = "2k2"
load = "2k2"
current = "0.3mA"
full_scale = "104dBSPL"

[input.aux]
kind = "line"
full_scale = "1Vrms"

[[stage]]
name = "mic amp"
kind = "non-inverting"
from = "capsule"
amplifier = "dual"
bias = "half"
c_in = "100n"
r_bias = "220k"
r_f = "100k"
r_g = "4k7"
c_g = "10u"

[[stage]]
name = "mix"
kind = "summer"
amplifier = "dual"
bias = "half"
r_f = "10k"
[[stage.input]]
from = "mic amp"
r = "10k"
[[stage.input]]
from = "aux"
r = "22k"
c = "1u"

[[stage]]
name = "filter"
kind = "sallen-key low-pass"
from = "sum"
amplifier = "dual"
r_1 = "10k"
r_2 = "10k"
c_1 = "2n2"
c_2 = "1n"

[converter]
from = "filter"
rate = "16kHz"
bits = 10
low = "0V"
high = "3V"
`

// base is whole with a name in place of one that is taken.
func base() string { return strings.Replace(whole, `name = "mix"`, `name = "sum"`, 1) }

// broken is base with each pair of texts exchanged.
func broken(t *testing.T, pairs ...string) string {
	t.Helper()
	text := base()
	for i := 0; i < len(pairs); i += 2 {
		if strings.Count(text, pairs[i]) != 1 {
			t.Fatalf("%q is there %d times", pairs[i], strings.Count(text, pairs[i]))
		}
		text = strings.Replace(text, pairs[i], pairs[i+1], 1)
	}
	return text
}

func TestFaults(t *testing.T) {
	mustRead(t, base())
	const line, capsule = `full_scale = "1Vrms"`, `full_scale = "104dBSPL"`
	const end = `high = "3V"`
	for _, c := range []struct {
		name  string
		pairs []string // old, new, …
		want  []string // text; remedy
	}{
		// Values.
		{"a misspelled value", []string{`r_f = "100k"`, `r_f = §"100q"`}, []string{`r_f: "100q" is not a resistance: "q" is no unit of it; write it as "4k7", "100R" or 4700`}},
		{"a value behind letters of more bytes", []string{"[supply]\nvoltage = \"5V\"", "supply = { \"voltage\" = §\"5Ω\", §\"µ\" = 1 }"}, []string{
			`voltage: "5Ω" is not a voltage: "Ω" is no unit of it; write it as "3.3V", "20mV" or 3.3`,
			`[supply] takes no "µ"; the keys are voltage`}},
		{"a number of farads", []string{`c_1 = "2n2"`, `c_1 = §104`}, []string{`c_1 = 104 is out of range, 10 fF to 1 F; a plain number is in farads; a capacitor's three-digit code is a text, "104"`}},
		{"a resistance of nothing", []string{`r_1 = "10k"`, `r_1 = §0`}, []string{`r_1 = 0 is out of range, 10 mΩ to 100 GΩ; check the unit and the power of ten`}},
		{"a negative one", []string{`r_1 = "10k"`, `r_1 = §"-10k"`}, []string{`r_1 = "-10k" is out of range, 10 mΩ to 100 GΩ; check the unit and the power of ten`}},
		{"infinity", []string{`r_1 = "10k"`, `r_1 = §inf`}, []string{`r_1 = inf is no finite number; write one that is`}},
		{"no number", []string{`r_1 = "10k"`, `r_1 = §nan`}, []string{`r_1 = nan is no finite number; write one that is`}},
		{"a level without unit", []string{line, `full_scale = §1.5`}, []string{`full_scale = 1.5 has no unit; write it as "2Vrms", "0.8Vpp", "0.4Vp", "-10dBV" or "+4dBu"`}},
		{"a level in plain volts", []string{line, `full_scale = §"1V"`}, []string{`full_scale: "1V" is not a signal level: plain volts may be RMS, peak or peak to peak; write it as "1Vrms", "1Vp" or "1Vpp"`}},
		{"a semicolon in a value", []string{`r_f = "100k"`, `r_f = §"100; k"`}, []string{`r_f: "100; k" is not a resistance: "; k" is no unit of it; write it as "4k7", "100R" or 4700`}},
		{"a gain out of range", []string{`class = "cmos rail-to-rail"`, "class = \"cmos rail-to-rail\"\nopen_loop_gain = §\"1000dB\""}, []string{`open_loop_gain = "1000dB" is out of range, 10 to 1e+09; check the unit and the power of ten`}},
		{"a share out of range", []string{end, end + "\n[limits]\noverload_time = §\"101%\""}, []string{`overload_time = "101%" is out of range, 0 % to 100 %; check the unit and the power of ten`}},
		{"a sound level out of range", []string{capsule, `full_scale = §"200dBSPL"`}, []string{`full_scale = "200dBSPL" is out of range, 0 dB SPL to 174 dB SPL; check the unit and the power of ten`}},
		{"a temperature out of range", []string{"[supply]", "[conditions]\ntemperature = §\"300C\"\n[supply]"}, []string{`temperature = "300C" is out of range, −50 °C to 200 °C; check the unit and the power of ten`}},
		{"a long text", []string{`c_1 = "2n2"`, `c_1 = §1` + strings.Repeat("0", 50) + ".0"}, []string{`c_1 = 1` + strings.Repeat("0", 39) + `… is out of range, 10 fF to 1 F; a plain number is in farads; a capacitor's three-digit code is a text, "1` + strings.Repeat("0", 50) + `.0"`}},

		// Wrong types.
		{"a truth as a value", []string{`r_1 = "10k"`, `r_1 = §true`}, []string{`r_1 must be a value, not neither text nor number; write a number, or a text such as "3.3V" or "4k7"`}},
		{"a list as a value", []string{`r_1 = "10k"`, `§r_1 = ["10k"]`}, []string{`r_1 must be a value, not a list; write a number, or a text such as "3.3V" or "4k7"`}},
		{"a table as a value", []string{`voltage = "5V"`, `voltage = §{ value = 5 }`}, []string{`voltage must be a value, not a table; write a number, or a text such as "3.3V" or "4k7"`}},
		{"a number as a text", []string{`title = "Test"`, `title = §5`}, []string{`title must be a text, not a number; put it in quotes`}},
		{"a number as a name", []string{`from = "filter"`, `from = §5`}, []string{`from must be a name, not a number; put it in quotes`}},
		{"a text as a number", []string{`bits = 10`, `bits = §"10"`}, []string{`bits must be a number from 1 to 24; write it without quotes and unit`}},
		{"a broken number of bits", []string{`bits = 10`, `bits = §10.5`}, []string{`bits must be a whole number; write one from 1 to 24`}},
		{"too many bits", []string{`bits = 10`, `bits = §25`}, []string{`bits must be a number from 1 to 24; write it without quotes and unit`}},
		{"a text as a table", []string{"[supply]\nvoltage = \"5V\"", `supply = §"5V"`}, []string{`supply must be a table, not a text; write it as [supply]`}},
		{"a key among named tables", []string{"[bias.half]", "[bias]\n§gain = 5\n[bias.half]"}, []string{`bias.gain must be a table, not a number; write it as [bias.NAME]`}},
		{"a table as a list", []string{end, end + "\n[§interferer]\ninto = \"supply\""}, []string{`interferer must be a list of tables, not a table; write each as [[interferer]]`}},
		{"a list of other things", []string{`title = "Test"`, `interferer = [§1]`}, []string{`interferer must be a list of tables, not of a number; write each as [[interferer]]`}},
		{"legs of other things", []string{"r_f = \"10k\"\n[[stage.input]]\nfrom = \"mic amp\"\nr = \"10k\"\n[[stage.input]]\nfrom = \"aux\"\nr = \"22k\"\nc = \"1u\"", "r_f = \"10k\"\ninput = [§\"aux\"]"}, []string{`input must be a list of tables, not of a text; write each as [[input]]`}},
		{"no legs", []string{"r_f = \"10k\"\n[[stage.input]]\nfrom = \"mic amp\"\nr = \"10k\"\n[[stage.input]]\nfrom = \"aux\"\nr = \"22k\"\nc = \"1u\"", "r_f = \"10k\"\n§input = []"}, []string{`stage "sum" has no input; add [[stage.input]]`}},

		// Keys.
		{"a misspelled key", []string{`r_1 = "10k"`, "r_1 = \"10k\"\n§r1 = \"10k\""}, []string{`stage "filter" takes no "r1"; did you mean "r_1"?`}},
		{"a misspelled table", []string{end, end + "\n[§limit]"}, []string{`the chain file takes no "limit"; did you mean "limits"?`}},
		{"a key of another kind of input", []string{line, line + "\n§sensitivity = \"-42dBV/Pa\""}, []string{`input "aux" takes no "sensitivity"; the keys are kind, channel, full_scale, calibrate, source_resistance`}},
		{"keys that there are none of", []string{
			`title = "Test"`, "§clamp = 1",
			line, line + "\n§gain = 1",
		}, []string{
			`the chain file takes no "clamp"; the keys are title, notes, supply, conditions, tolerance, bias, amplifier, input, stage, converter, interferer, limits`,
			`input "aux" takes no "gain"; the keys are kind, channel, full_scale, calibrate, source_resistance`,
		}},
		{"a part that is a table without value", []string{`r_1 = "10k"`, `r_1 = §{ ref = "R1" }`}, []string{`r_1 has no value; add it`}},
		{"a series that is none", []string{`r_1 = "10k"`, `r_1 = { value = "10k", series = §"E25" }`}, []string{`series: "E25" is no series of preferred values; choose E3, E6, E12, E24, E48, E96 or E192`}},
		{"no supply", []string{"[supply]\nvoltage = \"5V\"\n", "", `title`, `§title`}, []string{`the chain file has no supply; add it`}},
		{"no voltage", []string{"[supply]\nvoltage = \"5V\"\n", "[§supply]\n"}, []string{`[supply] has no voltage; add it`}},
		{"no part", []string{"[[stage]]\nname = \"filter\"", "[[§stage]]\nname = \"filter\"", "c_2 = \"1n\"\n", ""}, []string{`stage "filter" has no c_2; add it: sallen-key low-pass is from – r_1 – middle`}},
		{"no name", []string{"[[stage]]\nname = \"filter\"", "[[§stage]]"}, []string{`stage 3 has no name; add it`}},
		{"no load", []string{"[input.capsule]", "[input.§§capsule]", "load = \"2k2\"\ncurrent = \"0.3mA\"", ""}, []string{`input "capsule" has no load; add it`, `input "capsule" has no current; add it`}},

		// Words.
		{"a class that is none", []string{`class = "cmos rail-to-rail"`, `class = §"cmos rail-to-rial"`}, []string{`class must be one of "bipolar single-supply", "bipolar audio", "cmos rail-to-rail", "cmos micropower", "ideal"; did you mean "cmos rail-to-rail"?`}},
		{"a kind of input that is none", []string{`kind = "line"`, `kind = §"lines"`}, []string{`kind must be one of "line", "electret", "microphone"; did you mean "line"?`}},
		{"a kind of stage that is none", []string{`kind = "sallen-key low-pass"`, `kind = §"sallen-key lowpass"`}, []string{`kind must be one of "inverting", `}},
		{"a channel that is none", []string{line, line + "\nchannel = §\"left\""}, []string{`channel: "left" is no channel; write 1, 2, … without quotes, or "mix"`}},
		{"channel 0", []string{line, line + "\nchannel = §0"}, []string{`channel must be a number from 1 to 64; write it without quotes and unit`}},
		{"a leg that is none", []string{`c_g = "10u"`, "c_g = \"10u\"\nleg = §\"earth\""}, []string{`leg must be one of "ground", "bias"; choose one`}},

		// Calibration.
		{"full_scale and calibrate", []string{line, "§" + line + "\ncalibrate = { reading = \"1Vrms\", track = \"cal.wav\" }"}, []string{`input "aux" has both full_scale and calibrate; keep one`}},
		{"calibrate without its keys", []string{line, "calibrate = §§{ }"}, []string{`input "aux", calibrate has no track; add it`, `input "aux", calibrate has no reading; add it`}},
		{"calibrate that is no table", []string{line, `calibrate = §"cal.wav"`}, []string{`calibrate must be a table, not a text; write it as [calibrate]`}},
		{"calibrate with no recording", []string{line, `calibrate = { reading = "1Vrms", track = §"" }`}, []string{`track is "", no file; name the calibration recording, from the chain file's folder`}},
		{"a reading in plain volts", []string{line, `calibrate = { reading = §"1V", track = "cal.wav" }`}, []string{`reading: "1V" is not a signal level: plain volts may be RMS, peak or peak to peak; write it as "1Vrms"`}},
		{"a reading of sound at a line", []string{line, `calibrate = { reading = §"94dBSPL", track = "cal.wav" }`}, []string{`reading: "94dBSPL" is not a signal level`}},
		{"a reading of volts at a capsule", []string{capsule, `calibrate = { reading = §"20mVpp", track = "cal.wav" }`}, []string{`reading: "20mVpp" is not a sound level: "mVpp" is no unit of it; write it as "104dBSPL"`}},
		{"a reading out of range", []string{line, `calibrate = { reading = §"1000Vpp", track = "cal.wav" }`}, []string{`reading = "1000Vpp" is out of range, 1 µV RMS to 100 V RMS; check the unit`}},
		{"a stretch that ends before it begins", []string{line, `calibrate = { reading = "1Vrms", track = "cal.wav", from = "2s", to = §"2s" }`}, []string{`to is not after from; give a later one`}},
		{"a stretch before the recording", []string{line, `calibrate = { reading = "1Vrms", track = "cal.wav", from = §"-1s", §till = 2 }`}, []string{`from = "-1s" is out of range, 0 s to`, `input "aux", calibrate takes no "till"; the keys are track, reading, from, to`}},
		{"noise and snr", []string{capsule, capsule + "\nself_noise = \"30dBSPL\"\n§snr = \"60dB\""}, []string{`input "capsule" has both self_noise and snr; keep one`}},

		// Parts that go together.
		{"r_a alone", []string{`r_1 = "10k"`, "r_1 = \"10k\"\nbias = \"half\"\n§r_a = \"10k\""}, []string{`stage "filter" has r_a without r_b; give both, or neither for a gain of 1`}},
		{"r_b alone", []string{`r_1 = "10k"`, "r_1 = \"10k\"\n§r_b = \"10k\""}, []string{`stage "filter" has r_b without r_a; give both, or neither for a gain of 1`}},
		{"r_a without bias", []string{`r_1 = "10k"`, "r_1 = \"10k\"\n§r_a = \"10k\"\nr_b = \"10k\""}, []string{`stage "filter" has no bias for its r_a to end on; add bias`}},
		{"a bias for nothing", []string{`r_1 = "10k"`, "r_1 = \"10k\"\n§bias = \"half\""}, []string{`stage "filter" has a bias on which nothing ends; take it out, or add r_a`}},
		{"r_bias without bias", []string{"bias = \"half\"\nc_in = \"100n\"\nr_bias", "c_in = \"100n\"\n§r_bias"}, []string{`stage "mic amp" has no bias for its r_bias to end on; add bias`}},
		{"a leg without bias", []string{"bias = \"half\"\nc_in = \"100n\"\nr_bias = \"220k\"", "§leg = \"bias\""}, []string{`stage "mic amp" has no bias for its leg to end on; add bias`}},
		{"c_in without r_bias", []string{"bias = \"half\"\nc_in = \"100n\"\nr_bias = \"220k\"", "§c_in = \"100n\""}, []string{`stage "mic amp" has c_in without r_bias, so that its (+) input rests nowhere; add r_bias and a bias, or take c_in out`}},
		{"to without bias", []string{"kind = \"sallen-key low-pass\"\nfrom = \"sum\"\namplifier = \"dual\"\nr_1 = \"10k\"\nr_2 = \"10k\"\nc_1 = \"2n2\"\nc_2 = \"1n\"",
			"kind = \"rc high-pass\"\nfrom = \"sum\"\nc = \"1u\"\nr = \"10k\"\n§to = \"bias\""}, []string{`stage "filter" has no bias for its to to end on; add bias`}},
		{"an amplifier without room", []string{`class = "cmos rail-to-rail"`, `class = "bipolar audio"`, `voltage = "5V"`, `voltage = "3V"`, `[amplifier.dual]`, `[amplifier.§dual]`}, []string{
			`amplifier "dual" has no room to swing: on the supply of 3 V it reaches from 1.5 V to 1.5 V; take another class, or give swing_high and swing_low`}},

		// Converter, interferers.
		{"a rate and a clock", []string{`rate = "16kHz"`, "rate = \"16kHz\"\n§clock = \"1MHz\"\n§divide = 10"}, []string{`[converter] has both rate and clock; keep rate, or clock and divide`, `[converter] has both rate and divide; keep rate, or clock and divide`}},
		{"no rate", []string{"[converter]", "[§converter]", "rate = \"16kHz\"\n", ""}, []string{`[converter] has no rate; add rate, or clock and divide`}},
		{"a clock alone", []string{"[converter]", "[§converter]", `rate = "16kHz"`, `clock = "1MHz"`}, []string{`[converter] has no rate; add rate, or clock and divide`}},
		{"a clock divided too far", []string{`rate = "16kHz"`, "clock = \"1MHz\"\ndivide = §20_000"}, []string{`clock by divide makes a rate of 50 Hz, out of range, 100 Hz to 10 MHz; check both`}},
		{"high below low", []string{`low = "0V"`, `low = "3V"`, end, `high = §"3V"`}, []string{`the converter's span is too small: low is 3 V and high 3 V; high is above low by 1 mV or more`}},
		{"the supply below low", []string{`low = "0V"`, `low = "5V"`, end, `high = §"supply"`}, []string{`the converter's span is too small: low is 5 V and high 5 V; high is above low by 1 mV or more`}},
		{"acquisition alone", []string{end, end + "\n§acquisition = \"2us\"\n§switch_resistance = \"1k\"\n§shares_with = \"ground\""}, []string{
			`acquisition does nothing without sampling_capacitor; add it, or take this out`, `switch_resistance does nothing without sampling_capacitor; add it, or take this out`, `shares_with does nothing without sampling_capacitor; add it, or take this out`}},
		{"a sampling capacitor alone", []string{end, end + "\n§sampling_capacitor = \"10p\""}, []string{`sampling_capacitor needs to know how long it charges; add acquisition`}},
		{"an acquisition longer than a sample", []string{end, end + "\nsampling_capacitor = \"10p\"\nacquisition = §\"100us\""}, []string{`acquisition takes longer than a sample, 62.5 µs; check it against the rate`}},
		{"more effective bits than bits", []string{end, end + "\nenob = §10.5"}, []string{`enob must be a number from 1 to 10; write it without quotes and unit`}},
		{"bandwidth of a sine", []string{end, end + "\n[[interferer]]\ninto = \"aux\"\nlevel = \"1mVp\"\nfrequency = 1000\n§bandwidth = 10"}, []string{`interferer 1 takes no "bandwidth"; the keys are into, shape, frequency, level`}},
		{"a sine of no frequency", []string{end, end + "\n[[§interferer]]\ninto = \"aux\"\nlevel = \"1mVp\""}, []string{`interferer 1 has no frequency; add it`}},
		{"noise below 0 Hz", []string{end, end + "\n[[interferer]]\ninto = \"aux\"\nlevel = \"1mVrms\"\nshape = \"noise\"\nfrequency = 1000\nbandwidth = §2001"}, []string{`the noise goes below 0 Hz: bandwidth is more than twice its frequency, on which it is centred; leave frequency out for noise from 0 Hz on`}},
		{"noise with a peak", []string{end, end + "\n[[interferer]]\ninto = \"aux\"\nlevel = §\"1mVpp\"\nshape = \"noise\"\nbandwidth = 2000"}, []string{`noise has no peak; give its level as RMS, as in "2mVrms"`}},
		{"volts into a microphone", []string{end, end + "\n[[interferer]]\ninto = \"capsule\"\nlevel = §\"1mVp\"\nfrequency = 50"}, []string{`level: "1mVp" is not a sound level: "mVp" is no unit of it; write it as "104dBSPL"`}},

		// Names.
		{"a source that is none", []string{`from = "sum"`, `from = §"summ"`}, []string{`stage "filter": there is no input or stage "summ"; did you mean "sum"?`}},
		{"a source that is a bias", []string{`from = "sum"`, `from = §"half"`}, []string{`stage "filter": from must be an input or stage, and "half" is a bias; choose one of capsule, aux, mic amp, sum, filter`}},
		{"an amplifier that is none", []string{"from = \"sum\"\namplifier = \"dual\"", "from = \"sum\"\namplifier = §\"quad\""}, []string{`stage "filter": there is no amplifier "quad"; choose one of dual`}},
		{"a bias that is none", []string{"bias = \"half\"\nc_in", "bias = §\"halb\"\nc_in"}, []string{`stage "mic amp": there is no bias "halb"; did you mean "half"?`}},
		{"a buffer that is none", []string{`bypass = "10u"`, `buffer = §"duel"`}, []string{`bias "half": there is no amplifier "duel"; did you mean "dual"?`}},
		{"a source among long names", []string{`name = "sum"`, `name = "` + strings.Repeat("ä", 200) + `"`, `from = "sum"`, `from = §"` + strings.Repeat("ö", 200) + `"`}, []string{`stage "filter": there is no input or stage "` + strings.Repeat("ö", 40) + `…"; choose one of capsule, aux, mic amp, ` + strings.Repeat("ä", 40) + `…, filter`}},
		{"a leg from nowhere", []string{`from = "aux"`, `from = §"auxx"`}, []string{`stage "sum", input 2: there is no input or stage "auxx"; did you mean "aux"?`}},
		{"a leg twice", []string{`from = "aux"`, `from = §"mic amp"`, "[input.aux]", "[input.§aux]"}, []string{`input "aux" does not lead to the converter; take it out`, `stage "sum" takes "mic amp" twice; take one leg out`}},
		{"a converter from nowhere", []string{`from = "filter"`, `from = §"fliter"`}, []string{`[converter]: there is no input or stage "fliter"; did you mean "filter"?`}},
		{"an interferer into nothing", []string{end, end + "\n[[interferer]]\ninto = §\"suply\"\nlevel = \"1mVp\"\nfrequency = 50"}, []string{`interferer 1: there is no input "suply"; did you mean "supply"?`}},
		{"an interferer into a stage", []string{end, end + "\n[[interferer]]\ninto = §\"filter\"\nlevel = \"1mVp\"\nfrequency = 50"}, []string{`interferer 1: into must be an input, and "filter" is a stage; choose one of supply, capsule, aux`}},
		{"a capacitor shared with nothing", []string{end, end + "\nsampling_capacitor = \"10p\"\nacquisition = \"2us\"\nshares_with = §\"earth\""}, []string{`[converter]: there is no stage "earth"; choose one of ground, mic amp, sum, filter`}},
		{"a name twice", []string{`name = "sum"`, `name = §"aux"`, `from = "sum"`, `from = "mic amp"`}, []string{`the name "aux" is that of an input already; choose another: inputs, stages, biases and amplifiers share one set of names`}},
		{"a name twice, of stages", []string{`name = "sum"`, `name = §"mic amp"`, `from = "sum"`, `from = "mic amp"`}, []string{`the name "mic amp" is that of a stage already; choose another`}},
		{"a name with a point", []string{`name = "filter"`, `name = §"fil.ter"`, `from = "filter"`, `from = "fil.ter"`}, []string{`the name "fil.ter" has a point, an equals sign or a control character in it; take it out`}},
		{"a name that is taken", []string{`name = "sum"`, `name = §"mix"`, `from = "sum"`, `from = "mix"`}, []string{`the name "mix" means something already; choose another`}},
		{"a name that ends in a space", []string{`name = "sum"`, `name = §"sum "`, `from = "sum"`, `from = "sum "`}, []string{`the name "sum " begins or ends with a space; take it out`}},
		{"an empty name", []string{`name = "filter"`, `name = §""`}, []string{`the name is empty; give it one`}},
		{"a long name", []string{`name = "filter"`, `name = §"` + strings.Repeat("ä", 201) + `"`, `from = "filter"`, `from = "` + strings.Repeat("ä", 201) + `"`}, []string{`the name "` + strings.Repeat("ä", 40) + `…" is longer than 200 characters; shorten it`}},

		// What leads nowhere.
		{"a circle", []string{"[[stage]]\nname = \"mic amp\"", "[[§stage]]\nname = \"mic amp\"", `from = "capsule"`, `from = "filter"`}, []string{`stages go round in a circle: mic amp → filter → sum → mic amp; let each come from an input or from a stage nearer to one`}},
		{"a stage from itself", []string{"[[stage]]\nname = \"filter\"", "[[§stage]]\nname = \"filter\"", `from = "sum"`, `from = "filter"`}, []string{`stages go round in a circle: filter → filter; let each`}},
		{"unused stages and inputs", []string{`from = "filter"`, `from = "aux"`, "[input.capsule]", "[input.§capsule]", `name = "mic amp"`, `name = §"mic amp"`, `name = "sum"`, `name = §"sum"`, `name = "filter"`, `name = §"filter"`}, []string{
			`input "capsule" does not lead to the converter; take it out, or let a stage come from it`,
			`stage "mic amp" does not lead to the converter; take it out, or let another stage or the converter come from it`,
			`stage "sum" does not lead to the converter; take it out`, `stage "filter" does not lead to the converter; take it out`}},
		{"an unused bias and amplifier", []string{"[supply]", "[bias.§spare]\ntop = \"1k\"\nbottom = \"1k\"\n[amplifier.§extra]\nclass = \"ideal\"\n[supply]"}, []string{`nothing uses bias "spare"; take it out`, `nothing uses amplifier "extra"; take it out`}},

		// Several at once, of all classes.
		{"all at once", []string{`voltage = "5V"`, `voltage = §"5W"`, `from = "sum"`, `from = §"summ"`, `c_1 = "2n2"`, `c_1 = §104`, `bits = 10`, "bits = §0\n§bit = 1"}, []string{
			`voltage: "5W" is not a voltage`, `stage "filter": there is no input or stage "summ"; did you mean "sum"?`, `c_1 = 104 is out of range`, `bits must be a number from 1 to 24`, `[converter] takes no "bit"; did you mean "bits"?`}},
	} {
		t.Run(c.name, func(t *testing.T) {
			text, at := marked(broken(t, c.pairs...))
			check(t, faultsOf(t, text), at, c.want)
		})
	}
}

// check holds faults to their places and, as far as given, their texts.
func check(t *testing.T, faults chain.Faults, at []chain.Pos, want []string) {
	t.Helper()
	if len(faults) != len(at) || len(at) != len(want) {
		t.Fatalf("%d places are marked, %d texts wanted, and the faults are\n%v", len(at), len(want), faults)
	}
	for i, f := range faults {
		if f.File != "test.toml" || f.Pos != at[i] {
			t.Errorf("fault %d is at %s:%v, want %v: %s", i, f.File, f.Pos, at[i], f.Text)
		}
		if got := f.Text + "; " + f.Remedy; !strings.HasPrefix(got, want[i]) {
			t.Errorf("fault %d is\n%s, want\n%s", i, got, want[i])
		}
		if f.Remedy == "" {
			t.Errorf("fault %d has no remedy", i)
		}
	}
}

func TestFaultsOfWhatIsNotTOML(t *testing.T) {
	for _, c := range []struct{ name, text, want string }{
		{"no value", "title = \"é\" §oops", `expected newline but got U+006F 'o'; chain files are TOML`},
		{"a key twice", "title = \"a\"\n§title = \"b\"", `key title is already defined`},
		{"a table twice", "[supply]\n[§supply]", `table supply already exists`},
		{"a name with a space", "[input.mic §amp]", ``},
		{"not UTF-8", "title = \"Ω§\xff\"", `this is not text in UTF-8; save it as UTF-8`},
		{"too many keys", "§" + strings.Repeat("[a]\n", 20001), `the file has more than 20000 keys`},
		{"too deep", "a = " + strings.Repeat("[", 10000) + "§" + strings.Repeat("[", 9000), `arrays and inline tables are nested more than the maximum of 10000 levels deep`},
	} {
		t.Run(c.name, func(t *testing.T) {
			text, at := marked(c.text)
			check(t, faultsOf(t, text), at, []string{c.want})
		})
	}
	faults := faultsOf(t, strings.Repeat("#", 1<<20+1))
	if len(faults) != 1 || !strings.HasPrefix(faults[0].Text, "the file has more than 1048576 bytes") {
		t.Errorf("a large file:\n%v", faults)
	}
	if faults = faultsOf(t, ""); len(faults) != 3 || faults.Error() != `test.toml:1:1: the chain file has no supply; add it
test.toml:1:1: the chain file has no converter; add it
test.toml:1:1: the chain file has no input; add [input.NAME]` {
		t.Errorf("an empty file:\n%v", faults)
	}
}

func TestFaultsOfManyThings(t *testing.T) {
	var b strings.Builder
	for i := range 201 {
		fmt.Fprintf(&b, "[[stage]]\nname = \"s%d\"\nkind = \"divider\"\nfrom = \"aux\"\nr_top = \"1k\"\nr_bottom = \"1k\"\n", i)
	}
	faults := faultsOf(t, b.String()+base())
	if !slices.ContainsFunc(faults, func(f chain.Fault) bool { return f.Text == "there is more than 200 of stage" }) {
		t.Errorf("201 stages:\n%v", faults)
	}
	b.Reset()
	for i := range 150 {
		fmt.Fprintf(&b, "key_%d = 1\n", i)
	}
	faults = faultsOf(t, b.String()+base())
	if len(faults) != 101 || faults[99].Pos.Line != 100 || faults[100].Text != "and 50 more faults from here on" || faults[100].Pos.Line != 100 {
		t.Errorf("150 faults:\n%v", faults)
	}
}

func TestFaultsOfSelect(t *testing.T) {
	with := func(lines string) string {
		return broken(t, "kind = \"sallen-key low-pass\"\nfrom = \"sum\"\namplifier = \"dual\"\nr_1 = \"10k\"\nr_2 = \"10k\"\nc_1 = \"2n2\"\nc_2 = \"1n\"", "kind = \"select\"\n"+lines)
	}
	mustRead(t, with(`from = ["sum", "aux"]`+"\n"+`pick = "aux"`)) // what is not picked counts as used
	for _, c := range []struct {
		lines string
		want  []string
	}{
		{"from = [\"sum\", \"aux\"]\npick = §\"som\"", []string{`stage "filter" picks what is not in its from; did you mean "sum"?`}},
		{"from = [\"sum\", \"aux\"]\npick = §1", []string{`stage "filter" picks what is not in its from; pick one of sum, aux`}},
		{"from = [\"sum\", §\"sum\"]\npick = \"sum\"", []string{`stage "filter" takes "sum" twice; take one out`}},
		{"from = [\"sum\", §\"axu\"]\npick = \"sum\"", []string{`stage "filter": there is no input or stage "axu"; did you mean "aux"?`}},
		{"§from = []\npick = \"sum\"", []string{`from must be a list of names; write it as from = ["one", "other"]`}},
		{"from = §\"sum\"\npick = \"sum\"", []string{`from must be a list of names; write it as from = ["one", "other"]`}},
		{"from = [\"sum\", §5]\npick = \"sum\"", []string{`from must be a list of names, not of a number; put each in quotes`}},
	} {
		text, at := marked(with(c.lines))
		check(t, faultsOf(t, text), at, c.want)
	}
}

func TestWhatSharesTheConverterIsUsed(t *testing.T) {
	other := "[[stage]]\nname = \"other\"\nkind = \"rc low-pass\"\nfrom = \"aux\"\nr = \"1k\"\nc = \"1n\"\n[converter]"
	shared := "high = \"3V\"\nsampling_capacitor = \"10p\"\nacquisition = \"2us\"\nshares_with = \"other\""
	c := mustRead(t, broken(t, "[converter]", other, `high = "3V"`, shared))
	if c.Converter.SharesWith != "other" {
		t.Errorf("converter is %+v", c.Converter)
	}
	if faults := faultsOf(t, broken(t, "[converter]", other)); len(faults) != 1 || !strings.HasPrefix(faults[0].Text, `stage "other" does not lead`) {
		t.Errorf("without shares_with:\n%v", faults)
	}
}

func TestFaultsOfSet(t *testing.T) {
	mustRead(t, base(), "sum.aux.r=10k")
	for _, c := range []struct{ set, want string }{
		{"half.top=1\xfck", `this is not text in UTF-8; write it in UTF-8`},
		{"filter", `this is not NAME.key=value; write it as "mic amp.r_f=180k"`},
		{"filter=1", `this is not NAME.key=value; write it as "mic amp.r_f=180k"`},
		{".r_1=1", `this is not NAME.key=value; write it as "mic amp.r_f=180k"`},
		{"a.b.c.d.e=1", `this is not NAME.key=value; write it as "mic amp.r_f=180k"`},
		{"fliter.r_1=1k", `nothing is named "fliter"; did you mean "filter"?`},
		{"sum.capsule.r=1k", `"sum" has no table "capsule"; name a leg by what it comes from`},
		{"filter.r_1=1q", `r_1: "1q" is not a resistance: "q" is no unit of it; write it as "4k7", "100R" or 4700`},
		{"filter.r_1=", `r_1: "" is not a resistance: nothing is there; write it as`},
		{"filter.r_1=0", `r_1 = "0" is out of range, 10 mΩ to 100 GΩ; check the unit and the power of ten`},
		{"filter.r1=1k", `stage "filter" takes no "r1"; did you mean "r_1"?`},
		{"filter.from=summ", `stage "filter": there is no input or stage "summ"; did you mean "sum"?`},
		{"filter.kind=none", `kind must be one of "inverting"`},
		{"filter.bias=half", `stage "filter" has a bias on which nothing ends; take it out, or add r_a`},
		{"converter.bits=ten", `bits must be a number from 1 to 24; write it without quotes and unit`},
		{"converter.bits=10.5", `bits must be a whole number; write one from 1 to 24`},
		{"converter.high=-1V", `the converter's span is too small`},
		{"capsule.channel=left", `channel must be a number from 1 to 64`},
		{"capsule.supply_filter=1k", `supply_filter must be a table, not a text; write it as [supply_filter]`},
		{"sum.input=aux", `input must be a list of tables, not a text; write each as [[input]]`},
	} {
		t.Run(c.set, func(t *testing.T) {
			f := faultsOf(t, base(), c.set)[0]
			if f.File != fmt.Sprintf("--set %q", c.set) || f.Pos != (chain.Pos{}) || !strings.HasPrefix(f.Text+"; "+f.Remedy, c.want) {
				t.Errorf("it is\n%v, want\n%s", f, c.want)
			}
			if got := f.Error(); !strings.HasPrefix(got, f.File+": ") {
				t.Errorf("it reads %s", got)
			}
		})
	}
	// Faults of the file stay at their places, behind those of a set.
	text, at := marked(broken(t, `r_2 = "10k"`, `r_2 = §"10q"`))
	faults := faultsOf(t, text, "filter.r_1=1q", "x.y=1")
	if len(faults) != 3 || faults[2].Pos != at[0] {
		t.Errorf("faults are\n%v", faults)
	}
}

func TestWarnings(t *testing.T) {
	text, at := marked(broken(t, "c_1 = \"2n2\"\nc_2 = \"1n\"", "c_2 = §\"100\"\nc_1 = §\"220\""))
	c := mustRead(t, text, "half.bypass=470")
	if len(c.Warnings) != 3 || c.Warnings[0].File != `--set "half.bypass=470"` || c.Warnings[1].Pos != at[0] || c.Warnings[2].Pos != at[1] {
		t.Fatalf("warnings are\n%v", c.Warnings)
	}
	if got, want := c.Warnings[1].Error(), fmt.Sprintf(`test.toml:%d:%d: c_2: "100" is read as a three-digit code, 10 pF; write "10p" or "100p" to say which`, at[0].Line, at[0].Column); got != want {
		t.Errorf("it reads\n%s, want\n%s", got, want)
	}
}

// sound holds what Read returns to its promises, whatever it was given.
func sound(t interface {
	Helper()
	Errorf(string, ...any)
}, c *chain.Chain, err error) {
	t.Helper()
	if err != nil {
		faults, ok := err.(chain.Faults)
		if !ok || len(faults) == 0 || c != nil {
			t.Errorf("error is %#v, chain %v", err, c)
		}
		for i, f := range faults {
			if f.Text == "" || f.Remedy == "" || f.File == "" || strings.ContainsRune(f.Error(), '\n') || !utf8.ValidString(f.Error()) {
				t.Errorf("fault %d is %#v", i, f)
			}
			if fromSet := strings.HasPrefix(f.File, "--set "); fromSet != (f.Pos == chain.Pos{}) || !fromSet && (f.Pos.Line < 1 || f.Pos.Column < 1) {
				t.Errorf("fault %d has no place: %#v", i, f)
			}
			if i > 0 {
				if before := faults[i-1].Pos; f.Pos.Line < before.Line || f.Pos.Line == before.Line && f.Pos.Column < before.Column {
					t.Errorf("fault %d is before the one before it:\n%v", i, faults)
				}
			}
		}
		return
	}
	// What a circuit builder relies on.
	known := func(name string) bool { return c.StageNamed(name) != nil || c.InputNamed(name) != nil }
	if !known(c.Converter.From) || !(c.Converter.High > c.Converter.Low) || !(c.Converter.Rate >= 100) || c.Converter.Bits < 1 || !(c.Supply.Voltage > 0) {
		t.Errorf("converter is %+v on %v", c.Converter, c.Supply)
	}
	for _, p := range c.Parts() {
		if !(p.Value > 0 && p.Value <= 1e11) || p.Name == "" || p.Pos == (chain.Pos{}) {
			t.Errorf("part is %+v", p)
		}
	}
	for _, s := range c.Stages {
		if len(s.From) == 0 || slices.ContainsFunc(s.From, func(from string) bool { return !known(from) }) {
			t.Errorf("stage %q is from %q", s.Name, s.From)
		}
		if s.Kind.Amplifier == chain.Must && c.AmplifierNamed(s.Amplifier) == nil || s.Bias != "" && c.BiasNamed(s.Bias) == nil {
			t.Errorf("stage is %+v", s)
		}
		_, rBias := s.Part("r_bias")
		_, rA := s.Part("r_a")
		if s.Bias == "" && (s.Kind.Bias == chain.Must || rBias || rA || s.Leg == "bias" || s.To == "bias") {
			t.Errorf("stage %q ends on a bias that it has not", s.Name)
		}
		if s.Kind.Pick && !slices.Contains(s.From, s.Pick) {
			t.Errorf("stage %q picks %q of %q", s.Name, s.Pick, s.From)
		}
	}
	for _, in := range c.Inputs {
		if !(in.FullScale > 0) != (in.Calibrate != nil) || in.Kind != chain.Line && !(in.Sensitivity > 0) || in.Kind == chain.Electret && !(in.RatedLoad > 0 && in.Current > 0) {
			t.Errorf("input is %+v", in)
		}
	}
}

// TestFaultsAreInOrder breaks a sound file in a few places at once.
func TestFaultsAreInOrder(t *testing.T) {
	lines := strings.Split(readFile(t, "every-key.toml"), "\n")
	values := []string{"5", "-1", `"x"`, "true", "[]", "{}", `"half"`, `"own"`, `"one"`, `"4k7"`, `"104"`, "inf", `"noise"`, `["one", "aux"]`}
	rapid.Check(t, func(t *rapid.T) {
		text := slices.Clone(lines)
		for range rapid.IntRange(1, 8).Draw(t, "breaks") {
			i := rapid.IntRange(0, len(text)-1).Draw(t, "line")
			key, _, isKey := strings.Cut(text[i], " = ")
			switch rapid.IntRange(0, 2).Draw(t, "how") {
			case 0:
				text = slices.Delete(text, i, i+1)
			case 1:
				if isKey {
					text[i] = key + " = " + rapid.SampledFrom(values).Draw(t, "value")
				}
			case 2:
				if isKey {
					text[i] = key + "x" + text[i][len(key):]
				}
			}
		}
		c, err := chain.Read("test.toml", []byte(strings.Join(text, "\n")), nil)
		sound(t, c, err)
	})
}

// FuzzRead looks for what makes Read panic, or break its promises.
func FuzzRead(f *testing.F) {
	files, err := filepath.Glob(filepath.Join("..", "testdata", "chains", "*.toml"))
	if err != nil || len(files) == 0 {
		f.Fatalf("no seeds: %v", err)
	}
	for _, name := range files {
		data, err := os.ReadFile(name)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(data, "half.top=1k")
	}
	f.Add([]byte(chain.Starter()), "line amp.r_f=10k")
	f.Add([]byte(base()), "sum.aux.r=10k")
	f.Add([]byte(base()), "half.top=1\xfck") // once a panic
	f.Add([]byte("\"\\u00e9\" = { a.b = [1, { c = 2 }] }\n[[x.y]]\n[x.z]\n"), "x.y.z=1")
	f.Fuzz(func(t *testing.T, data []byte, set string) {
		c, err := chain.Read("test.toml", data, []string{set})
		sound(t, c, err)
	})
}
