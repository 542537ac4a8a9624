package report

import (
	"html"
	"html/template"
	"math"
)

// levelDiagram draws each stage's rest, excursions and limits, and the converter's span, on one scale of volts.
func levelDiagram(run *Run) template.HTML {
	return diagram(run, 760, "wide") + diagram(run, 350, "narrow")
}

func diagram(run *Run, width float64, class string) template.HTML {
	type bar struct {
		name                            string
		rest, low, high, floor, ceiling Number
	}
	var bars []bar
	for _, s := range run.Stages {
		bars = append(bars, bar{clean(s.Name), s.RestV, s.LowestV, s.HighestV, s.LimitLowV, s.LimitHighV})
	}
	c := run.Converter
	bars = append(bars, bar{"converter: its span", Number{}, Number{}, Number{}, c.LowV, c.HighV})
	volt := axis{label: "V", lo: 0}
	var ends reach
	for _, b := range bars {
		for _, n := range []Number{b.rest, b.low, b.high, b.floor, b.ceiling, run.Rest.SupplyV} {
			if x, there := n.Value(); there {
				ends.of([]float64{x})
			}
		}
	}
	volt.lo, volt.hi = math.Min(0, ends.lo), ends.hi
	if !(volt.hi > volt.lo) {
		volt.hi = volt.lo + 1
	}
	pad := 0.02 * (volt.hi - volt.lo)
	volt.lo, volt.hi = volt.lo-pad, volt.hi+pad
	const each, edge = 40., 12.
	across := width - 2*edge
	height := each * float64(len(bars))
	p := &pen{}
	p.put(`<svg class="figure %s" viewBox="0 0 %s %s" role="img">`+"\n<title>", class, px(width), px(height+foot))
	p.WriteString("Level diagram</title>\n<desc>" + html.EscapeString("Volts at each stage's output: limits, excursions and rest. The figures are in the table of the stages.") + "</desc>\n")
	for _, t := range volt.ticks(across, 40) {
		x := edge + across*volt.at(t.at)
		p.put(`<path class="grid" d="M%s 0v%s"/>`+"\n", px(x), px(height))
		p.words(x, height+17, "tick", "middle", t.text)
	}
	if supply, there := run.Rest.SupplyV.Value(); there {
		x := edge + across*volt.at(supply)
		p.put(`<path class="mark" d="M%s 0v%s"/>`+"\n", px(x), px(height))
		p.words(x-6, 12, "note", "end", "supply, "+volts(run.Rest.SupplyV))
	}
	box := func(class string, low, high Number, y, tall float64) {
		a, isLow := low.Value()
		b, isHigh := high.Value()
		if isLow && isHigh {
			p.put(`<rect class="%s" x="%s" y="%s" width="%s" height="%s"/>`+"\n", class, px(edge+across*volt.at(a)), px(y), px(math.Max(across*(volt.at(b)-volt.at(a)), 1)), px(tall))
		}
	}
	for i, b := range bars {
		y := each*float64(i) + 18
		p.words(edge+2, y-3, "note", "start", short(b.name, int((width-160)/letter)))
		box("reach", b.floor, b.ceiling, y, 18)
		box("went", b.low, b.high, y+4, 10)
		if x, there := b.rest.Value(); there {
			p.put(`<path class="rests" d="M%s %sv22"/>`+"\n", px(edge+across*volt.at(x)), px(y-2))
		}
	}
	p.words(edge+across/2, height+36, "axis", "middle", "volts at the output, DC included")
	p.put("</svg>\n")
	return template.HTML(p.String())
}
