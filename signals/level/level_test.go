package level

import (
	"math"
	"testing"
)

// aTable holds the A-weighting at the nominal frequencies in Hz: as printed, to 0.1 dB, in IEC 61672-1:2013 table 3 (and
// GOST 17187-2010), and with more digits after its annex E, both at the exact frequency 1000·10^(n/10) Hz, which the
// first row's n is −20 of.
var aTable = []struct{ nominal, printed, computed float64 }{
	{10, -70.4, -70.430368},
	{12.5, -63.4, -63.371118},
	{16, -56.7, -56.688089},
	{20, -50.5, -50.45216},
	{25, -44.7, -44.702968},
	{31.5, -39.4, -39.439966},
	{40, -34.6, -34.630253},
	{50, -30.2, -30.228208},
	{63, -26.2, -26.194344},
	{80, -22.5, -22.50379},
	{100, -19.1, -19.142777},
	{125, -16.1, -16.098411},
	{160, -13.4, -13.350305},
	{200, -10.9, -10.87037},
	{250, -8.6, -8.630293},
	{315, -6.6, -6.611009},
	{400, -4.8, -4.808433},
	{500, -3.2, -3.232658},
	{630, -1.9, -1.900475},
	{800, -0.8, -0.823856},
	{1000, 0, 0.0},
	{1250, 0.6, 0.591164},
	{1600, 1.0, 0.980699},
	{2000, 1.2, 1.199942},
	{2500, 1.3, 1.270698},
	{3150, 1.2, 1.198698},
	{4000, 1.0, 0.969877},
	{5000, 0.5, 0.548652},
	{6300, -0.1, -0.121206},
	{8000, -1.1, -1.110658},
	{10000, -2.5, -2.491787},
	{12500, -4.3, -4.317514},
	{16000, -6.6, -6.602564},
	{20000, -9.3, -9.316925},
}

func TestAWeighting(t *testing.T) {
	if len(aTable) != 34 {
		t.Fatalf("%d rows", len(aTable))
	}
	for i, row := range aTable {
		f := 1000 * math.Pow(10, float64(i-20)/10)
		got := AWeighting(f)
		const digits = 1e-6 // those of the table
		if !(math.Abs(got-row.computed) <= digits) {
			t.Errorf("%g Hz: %.7f dB, want %.6f", row.nominal, got, row.computed)
		}
		if !(math.Abs(got-row.printed) <= 0.05) { // rounded to 0.1
			t.Errorf("%g Hz: %.3f dB, want %.1f", row.nominal, got, row.printed)
		}
	}
	if got := AWeighting(0); !math.IsInf(got, -1) {
		t.Errorf("at 0 Hz it is %g dB", got)
	}
}

// thirdsTable holds nominal, lower, exact middle and upper frequencies in Hz after IEC 61260-1:2014, base 10.
var thirdsTable = []Band{
	{20, 17.7827941, 19.95262315, 22.38721139},
	{25, 22.38721139, 25.11886432, 28.18382931},
	{31.5, 28.18382931, 31.6227766, 35.48133892},
	{40, 35.48133892, 39.81071706, 44.66835922},
	{50, 44.66835922, 50.11872336, 56.23413252},
	{63, 56.23413252, 63.09573445, 70.79457844},
	{80, 70.79457844, 79.43282347, 89.12509381},
	{100, 89.12509381, 100.0, 112.2018454},
	{125, 112.2018454, 125.8925412, 141.2537545},
	{160, 141.2537545, 158.4893192, 177.827941},
	{200, 177.827941, 199.5262315, 223.8721139},
	{250, 223.8721139, 251.1886432, 281.8382931},
	{315, 281.8382931, 316.227766, 354.8133892},
	{400, 354.8133892, 398.1071706, 446.6835922},
	{500, 446.6835922, 501.1872336, 562.3413252},
	{630, 562.3413252, 630.9573445, 707.9457844},
	{800, 707.9457844, 794.3282347, 891.2509381},
	{1000, 891.2509381, 1000.0, 1122.018454},
	{1250, 1122.018454, 1258.925412, 1412.537545},
	{1600, 1412.537545, 1584.893192, 1778.27941},
	{2000, 1778.27941, 1995.262315, 2238.721139},
	{2500, 2238.721139, 2511.886432, 2818.382931},
	{3150, 2818.382931, 3162.27766, 3548.133892},
	{4000, 3548.133892, 3981.071706, 4466.835922},
	{5000, 4466.835922, 5011.872336, 5623.413252},
	{6300, 5623.413252, 6309.573445, 7079.457844},
	{8000, 7079.457844, 7943.282347, 8912.509381},
	{10000, 8912.509381, 10000.0, 11220.18454},
	{12500, 11220.18454, 12589.25412, 14125.37545},
	{16000, 14125.37545, 15848.93192, 17782.7941},
	{20000, 17782.7941, 19952.62315, 22387.21139},
}

func TestThirds(t *testing.T) {
	bands := Thirds(22387.3)
	if len(bands) != len(thirdsTable) {
		t.Fatalf("%d bands, want %d", len(bands), len(thirdsTable))
	}
	for i, want := range thirdsTable {
		const digits = 1e-9 // those of the table
		same := func(got, want float64) bool { return math.Abs(got-want) <= digits*want }
		if got := bands[i]; got.Nominal != want.Nominal || !same(got.Low, want.Low) || !same(got.Middle, want.Middle) || !same(got.High, want.High) {
			t.Errorf("band %d is %v, want %v", i, got, want)
		}
	}
	if got := Thirds(22387); len(got) != len(thirdsTable)-1 {
		t.Errorf("below 22387 Hz there are %d bands", len(got))
	}
	if got := Thirds(22); len(got) != 0 {
		t.Errorf("below 22 Hz there are %d bands", len(got))
	}
}

// AES17: a sine whose peaks reach full scale is 0 dBFS; a square wave that does is 3.01 dB more.
func TestDBFS(t *testing.T) {
	for _, c := range []struct{ rms, want float64 }{
		{math.Sqrt(0.5), 0}, {1, 3.010299956639812}, {0.05, -23.010299956639813}, {0, math.Inf(-1)},
	} {
		const rounding = 1e-12
		if got := DBFS(c.rms); got != c.want && !(math.Abs(got-c.want) <= rounding) {
			t.Errorf("%g is %g dBFS, want %g", c.rms, got, c.want)
		}
	}
	if got := Peak(-0.1); !(math.Abs(got+20) <= 1e-12) {
		t.Errorf("a peak of -0.1 is %g dB", got)
	}
}
