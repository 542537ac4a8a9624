async () => {
	const faults = [];
	const all = (what, from = document) => [...from.querySelectorAll(what)];
	const seen = e => e.checkVisibility() && e.getClientRects().length > 0;
	const tag = e => e.outerHTML.slice(0, 100);

	// Reflow (1.4.10): nothing is wider than the window but what scrolls by itself.
	if (document.documentElement.scrollWidth > document.documentElement.clientWidth)
		faults.push(`the page is ${document.documentElement.scrollWidth} wide in ${document.documentElement.clientWidth}`);

	// Contrast (1.4.3), relative luminance by its definition.
	const parse = c => { const m = c.match(/[\d.]+/g).map(Number); return { rgb: m.slice(0, 3), alpha: m.length > 3 ? m[3] : 1 }; };
	const luminance = rgb => {
		const [r, g, b] = rgb.map(v => (v /= 255) <= 0.04045 ? v / 12.92 : ((v + 0.055) / 1.055) ** 2.4);
		return 0.2126 * r + 0.7152 * g + 0.0722 * b;
	};
	const contrast = (a, b) => { const [x, y] = [luminance(a), luminance(b)].sort((p, q) => q - p); return (x + 0.05) / (y + 0.05); };
	const behind = e => {
		for (; e; e = e.parentElement) {
			const c = parse(getComputedStyle(e).backgroundColor);
			if (c.alpha > 0) return c.rgb;
		}
		return [255, 255, 255];
	};
	const shade = () => { const p = document.createElement("p"); p.style.color = "var(--shade)"; document.body.append(p); const c = parse(getComputedStyle(p).color).rgb; p.remove(); return c; };
	const shaded = shade();
	let texts = 0;
	const walk = document.createTreeWalker(document.body, NodeFilter.SHOW_TEXT);
	for (let node; (node = walk.nextNode());) {
		const e = node.parentElement;
		if (!node.data.trim() || !seen(e) || e.closest("title, desc, script, style")) continue;
		texts++;
		const s = getComputedStyle(e), drawing = e.closest("svg");
		const color = parse(drawing ? s.fill : s.color).rgb;
		const size = parseFloat(s.fontSize), large = size >= 24 || size >= 18.66 && Number(s.fontWeight) >= 700;
		const grounds = drawing && s.fill && e.classList.contains("note") ? [behind(drawing.parentElement), shaded] : [behind(e.closest("svg")?.parentElement ?? e)];
		for (const ground of grounds) {
			const ratio = contrast(color, ground);
			if (!(ratio >= (large ? 3 : 4.5))) faults.push(`contrast ${ratio.toFixed(2)}: ${node.data.trim().slice(0, 40)}`);
		}
	}
	if (texts < 20) faults.push(`only ${texts} texts were looked at`);
	// Contrast of what is drawn (1.4.11): lines and bars.
	for (const e of all("svg .curve, svg .rests, svg .went, svg .mark, svg .span").filter(seen)) {
		const s = getComputedStyle(e), color = s.stroke !== "none" ? s.stroke : s.fill;
		const ratio = contrast(parse(color).rgb, behind(e.closest("svg").parentElement));
		if (!(ratio >= 3)) faults.push(`contrast ${ratio.toFixed(2)}: ${tag(e)}`);
	}

	// Names (4.1.2, 1.1.1) and structure.
	const name = e => {
		const by = e.getAttribute("aria-labelledby");
		if (by) return by.split(" ").map(id => document.getElementById(id)?.textContent ?? "").join(" ").trim();
		if (e.getAttribute("aria-label")) return e.getAttribute("aria-label").trim();
		if (e.labels?.length) return e.labels[0].textContent.trim();
		if (e.tagName.toLowerCase() === "svg") return e.querySelector(":scope > title")?.textContent.trim() ?? "";
		return e.textContent.trim();
	};
	for (const e of all("a, button, input, audio, summary, section, svg[role=img], [role=region]").filter(seen))
		if (!name(e)) faults.push(`no name: ${tag(e)}`);
	if (all("h1").length !== 1) faults.push(`${all("h1").length} headings of the first level`);
	let level = 1;
	for (const h of all("h1, h2, h3")) {
		const own = Number(h.tagName[1]);
		if (own > level + 1) faults.push(`a heading skips a level: ${tag(h)}`);
		level = own;
	}
	if (!document.documentElement.lang || !document.title.trim()) faults.push("no language, or no title");
	for (const table of all("table")) if (!table.caption?.textContent.trim() || !table.querySelector("th[scope=col]")) faults.push(`a table without caption or headings: ${tag(table)}`);
	const ids = all("[id]").map(e => e.id);
	for (const id of new Set(ids.filter((id, i) => ids.indexOf(id) !== i))) faults.push(`the id ${id} is there twice`);

	// Target size (2.5.8): 24 by 24, but for links within sentences.
	for (const e of all("button, input, summary, nav a, .marks a").filter(seen)) {
		const box = e.getBoundingClientRect();
		if (box.height < 24 || box.width < 24) faults.push(`a target of ${box.width.toFixed(0)} by ${box.height.toFixed(0)}: ${tag(e)}`);
	}
	// What is drawn stays within its drawing.
	for (const svg of all("svg.figure").filter(seen)) {
		const box = svg.getBoundingClientRect();
		for (const text of all("text", svg)) {
			const t = text.getBoundingClientRect();
			if (t.left < box.left - 1 || t.right > box.right + 1 || t.top < box.top - 1 || t.bottom > box.bottom + 1) faults.push(`cut off: ${text.textContent} in ${svg.querySelector("title").textContent}`);
		}
	}
	return faults;
}
