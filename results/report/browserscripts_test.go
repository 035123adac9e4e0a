package report

// Scripts that look at a page as it stands in the browser.
const (
	// overlapping lists pairs of words of one visible figure whose boxes share more than a pixel both ways.
	overlapping = `
	const out = [];
	for (const svg of document.querySelectorAll('figure svg')) {
		if (!svg.getClientRects().length) continue;
		const words = [...svg.querySelectorAll('text')].map(e => {
			const r = e.getBoundingClientRect();
			return {s: e.textContent, r};
		});
		for (let i = 0; i < words.length; i++) for (let j = 0; j < i; j++) {
			const a = words[i].r, c = words[j].r;
			// A box holds the whole line, of which a fifth above and below is blank.
			const dx = Math.min(a.right, c.right) - Math.max(a.left, c.left);
			const dy = Math.min(a.bottom - a.height / 5, c.bottom - c.height / 5) - Math.max(a.top + a.height / 5, c.top + c.height / 5);
			const turned = a.height > a.width * 1.5 || c.height > c.width * 1.5;
			if (dx > (turned ? 3 : 1) && dy > 1) out.push(svg.id + ': ' + words[i].s + ' / ' + words[j].s + ' ' + dx.toFixed(1) + ' x ' + dy.toFixed(1));
		}
	}
	return out;`
	// emptyFigures lists visible figures without words, marks or size, and counts all visible ones.
	emptyFigures = `
	let n = 0; const out = [];
	for (const svg of document.querySelectorAll('figure svg')) {
		if (!svg.getClientRects().length) continue;
		n++;
		const r = svg.getBoundingClientRect();
		const marks = [...svg.querySelectorAll('path')].filter(p => { const b = p.getBBox(); return b.width + b.height > 1; });
		if (r.width < 200 || r.height < 40 || marks.length < 5 || svg.querySelectorAll('text').length < 3) out.push(svg.id + ' ' + r.width + ' x ' + r.height + ', ' + marks.length + ' marks');
	}
	return {n, out};`
	// inaccessible lists what keyboards and screen readers would stumble over.
	inaccessible = `
	const out = [], fault = (e, what) => out.push(e.tagName + ' ' + (e.id || e.className) + ' ' + what);
	if (!document.documentElement.lang) out.push('no language');
	if (document.querySelectorAll('h1').length !== 1 || !document.querySelector('main')) out.push('no single heading, or no main part');
	for (const svg of document.querySelectorAll('figure svg')) {
		const t = svg.querySelector(':scope > title'), d = svg.querySelector(':scope > desc');
		if (svg.getAttribute('role') !== 'img' || !t || !t.textContent || !d || !d.textContent) fault(svg, 'has no name or no description');
	}
	for (const e of document.querySelectorAll('svg.glyph')) if (e.getAttribute('aria-hidden') !== 'true') fault(e, 'is decoration that is read out');
	for (const e of document.querySelectorAll('table')) if (!e.caption || !e.caption.textContent.trim()) fault(e, 'has no caption');
	for (const e of document.querySelectorAll('.scroll')) if (e.tabIndex !== 0 || !e.getAttribute('aria-label')) fault(e, 'scrolls, but not by keys, or has no name');
	for (const e of document.querySelectorAll('input')) if (!e.labels.length || !e.labels[0].textContent.trim()) fault(e, 'has no label');
	for (const e of document.querySelectorAll('fieldset')) if (!e.querySelector('legend')) fault(e, 'has no legend');
	for (const e of document.querySelectorAll('button, summary, a')) if (!e.textContent.trim()) fault(e, 'says nothing');
	for (const e of document.querySelectorAll('button, input, summary, a[href], svg[data-panels]')) {
		if (!e.getClientRects().length) continue;
		e.focus();
		if (document.activeElement !== e) fault(e, 'cannot have the focus');
	}
	const skip = document.querySelector('a.skip'); skip.focus();
	if (skip.getBoundingClientRect().left < 0) out.push('the skip link stays out of sight');
	skip.blur();
	return out;`
	// wide lists what reaches beyond the window, but for what scrolls by itself.
	tooWide = `
	const w = document.documentElement.clientWidth, out = [];
	if (document.documentElement.scrollWidth > w) out.push('the page is ' + document.documentElement.scrollWidth + ' px wide in ' + w);
	for (const e of document.querySelectorAll('main *')) {
		if (e.closest('.scroll') && !e.matches('.scroll') && !e.closest('.stacked')) continue;
		if (e.closest('svg') && e.tagName !== 'svg' || e.closest('details:not([open])') && e.tagName !== 'SUMMARY' || getComputedStyle(e).position === 'absolute') continue;
		if (e.closest('thead')) continue;
		const r = e.getBoundingClientRect();
		if (r.width && r.right > w + 1) out.push(e.tagName + '.' + e.className + ' ends at ' + r.right);
	}
	return out;`
)
