
// Everything on the page is there without this script. It adds: going to an overload in the players, swapping track and
// heard in place, sorting tables, and reading values off the figures.

const all = (what, from = document) => [...from.querySelectorAll(what)];
const minus = (x, digits) => x.toFixed(digits).replace(/^-(?=.*[1-9])/, "−").replace(/^-/, "");

// Players.
const passages = all(".passages li").map(li => [Number(li.dataset.from), Number(li.dataset.to)]);
const sounds = all(".player audio");
const called = name => document.querySelector("#player-" + name + " audio");
let current = called("heard") ?? sounds[0];

// placed returns where a time on the track lies in the players; undefined where they do not hold it.
function placed(time) {
	let start = 0;
	for (const [from, to] of passages) {
		if (time >= from && time < to) return start + time - from;
		start += to - from;
	}
}

for (const sound of sounds) {
	sound.addEventListener("play", () => {
		current = sound;
		for (const other of sounds) if (other !== sound) other.pause();
		tell();
	});
}

function tell() {
	const playing = document.getElementById("playing");
	if (playing) playing.textContent = current.paused ? "" : "Playing: " + document.getElementById(current.getAttribute("aria-labelledby")).textContent;
}

function seek(time) {
	const at = placed(time);
	if (at === undefined || !current) return false;
	for (const sound of sounds) sound.currentTime = at;
	current.play().catch(() => {});
	return true;
}

for (const link of all("[data-seek]")) {
	link.addEventListener("click", event => {
		if (seek(Math.max(0, Number(link.dataset.seek) - 0.25)) || seek(Number(link.dataset.seek))) event.preventDefault();
	});
}

// The time axis: where the players are, and to go elsewhere.
const timeline = document.querySelector("svg.time");
function follow() {
	if (!timeline || !current || !(current.duration > 0)) return;
	const head = timeline.querySelector(".head");
	for (const end of ["x1", "x2"]) head.setAttribute(end, 100 * current.currentTime / current.duration + "%");
}
for (const sound of sounds) for (const what of ["timeupdate", "seeked", "loadedmetadata"]) sound.addEventListener(what, follow);
timeline?.addEventListener("click", event => {
	if (event.target.closest("a") || !current || !(current.duration > 0)) return;
	const box = timeline.getBoundingClientRect();
	const at = Math.min(Math.max((event.clientX - box.left) / box.width, 0), 1) * current.duration;
	for (const sound of sounds) sound.currentTime = at;
});

function swap() {
	const [track, heard] = [called("track"), called("heard")];
	if (!track || !heard) return;
	const [from, to] = current === heard ? [heard, track] : [track, heard];
	const playing = !from.paused;
	to.currentTime = from.currentTime;
	from.pause();
	current = to;
	if (playing) to.play().catch(() => {});
	document.getElementById("playing").textContent = (playing ? "Playing: " : "Next: ") + (to === heard ? "heard" : "track");
}

const button = document.getElementById("swap");
if (button && called("track") && called("heard")) {
	button.closest("p").hidden = false;
	button.addEventListener("click", swap);
	document.addEventListener("keydown", event => {
		const plain = !event.ctrlKey && !event.altKey && !event.metaKey && !event.repeat;
		if (event.key === "x" && plain && document.getElementById("key").checked) swap();
	});
}

// Tables sort by the column whose heading is pressed; once more turns the order round.
for (const table of all("main table")) {
	const body = table.tBodies[0];
	if (!body || body.rows.length < 2) continue;
	all("thead th", table).forEach((head, column) => {
		const press = document.createElement("button");
		press.type = "button";
		press.append(...head.childNodes);
		head.append(press);
		press.addEventListener("click", () => {
			const down = head.getAttribute("aria-sort") === "ascending";
			for (const other of all("thead th", table)) other.removeAttribute("aria-sort");
			head.setAttribute("aria-sort", down ? "descending" : "ascending");
			const key = row => {
				const cell = row.cells[column], data = cell.querySelector("data, [data-sort]");
				const value = data ? (data.dataset.sort ?? data.value) : cell.textContent.trim();
				return value !== "" && Number.isFinite(Number(value)) ? Number(value) : value;
			};
			const order = (a, b) => {
				if (a === "" || b === "") return (a === "") - (b === "");
				const way = typeof a === "number" && typeof b === "number" ? a - b : String(a).localeCompare(String(b), undefined, { numeric: true });
				return down ? -way : way;
			};
			body.append(...[...body.rows].sort((a, b) => order(key(a), key(b))));
		});
	});
}

// Figures tell their values where the pointer is, and by the arrow keys.
function axis(text) {
	const [lo, hi, kind, unit = ""] = text.split(" ");
	const [a, b] = [Number(lo), Number(hi)];
	return {
		kind, unit,
		from: x => kind === "log" ? a * Math.pow(b / a, x) : a + (b - a) * x,
	};
}

function figure(x) {
	const size = Math.abs(x);
	if (size >= 1000) return minus(x / 1000, size >= 100000 ? 0 : size >= 10000 ? 1 : 2) + "k";
	return minus(x, size >= 100 ? 0 : size >= 10 ? 1 : size >= 1 ? 2 : 3);
}

function clock(x) {
	const tenths = Math.round(x * 10);
	return Math.floor(tenths / 600) + ":" + String(Math.floor(tenths / 10) % 60).padStart(2, "0") + "." + tenths % 10;
}

// points returns a path's points; a gap is null.
function points(path) {
	const list = [];
	for (const [, word, x, y] of path.getAttribute("d").matchAll(/([ML])([-\d.]+) ([-\d.]+)/g)) {
		if (word === "M" && list.length) list.push(null);
		list.push([Number(x), Number(y)]);
	}
	return list;
}

// height returns where a line is at x, between its points.
function height(list, x) {
	for (let i = 1; i < list.length; i++) {
		const [a, b] = [list[i - 1], list[i]];
		if (a && b && a[0] <= x && x <= b[0]) return b[0] > a[0] ? a[1] + (b[1] - a[1]) * (x - a[0]) / (b[0] - a[0]) : b[1];
	}
}

for (const svg of all("svg[data-area]")) {
	const [left, top, across, tall] = svg.dataset.area.split(" ").map(Number);
	const [x, y] = [axis(svg.dataset.x), axis(svg.dataset.y)];
	const holder = svg.closest("figure");
	let told = holder.querySelector("output");
	if (!told) {
		told = document.createElement("output");
		told.textContent = document.querySelector("figure output") ? "" : "Point at a figure, or use the arrow keys on it, to read values.";
		holder.append(told);
	}
	const line = document.createElementNS(svg.namespaceURI, "path");
	line.setAttribute("class", "reading");
	svg.append(line);
	svg.setAttribute("tabindex", "0");
	let lines, at = 0.5;
	const read = (share, up) => {
		at = Math.min(1, Math.max(0, share));
		lines ??= all("path.curve[data-name]", svg).filter(p => p.dataset.name).map(p => [p.dataset.name, points(p)]);
		line.setAttribute("d", `M${left + across * at} ${top}v${tall}`);
		const value = x.from(at);
		const parts = [x.kind === "clock" ? clock(value) : figure(value) + (x.unit === "Hz" && Math.abs(value) >= 1000 ? "" : " ") + x.unit];
		for (const [name, list] of lines) {
			const h = height(list, across * at);
			if (h !== undefined) parts.push(name + " " + figure(y.from(1 - h / tall)) + " " + y.unit);
		}
		if (!lines.length && up !== undefined) parts.push(figure(y.from(Math.min(1, Math.max(0, up)))) + (y.unit === "Hz" ? "Hz" : " " + y.unit));
		told.textContent = parts.join(" · ");
	};
	const where = event => {
		const box = svg.getBoundingClientRect(), scale = svg.viewBox.baseVal.width / box.width;
		return [((event.clientX - box.left) * scale - left) / across, 1 - ((event.clientY - box.top) * scale - top) / tall];
	};
	svg.addEventListener("pointermove", event => read(...where(event)));
	svg.addEventListener("keydown", event => {
		const step = { ArrowLeft: -0.01, ArrowRight: 0.01 }[event.key];
		if (step) {
			event.preventDefault();
			read(at + step);
		} else if (event.key === "Enter" && "seeks" in svg.dataset) {
			play(x.from(at));
		}
	});
	const play = time => {
		if (!seek(time)) told.textContent = clock(time) + " is in none of the passages that the players hold.";
	};
	if ("seeks" in svg.dataset && sounds.length) {
		svg.classList.add("seeks");
		const caption = holder.querySelector("figcaption");
		if (!("told" in caption.dataset)) caption.append(" Click, or press Enter, to play from there.");
		caption.dataset.told = "";
		svg.addEventListener("click", event => {
			const [share] = where(event);
			if (share >= 0 && share <= 1) play(x.from(share));
		});
	}
}
