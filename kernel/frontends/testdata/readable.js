// Measures what a reader can see of a page.

// contrast returns the contrast ratio (WCAG 2.1) between an element's text and what lies behind it.
window.contrast = element => {
	const parse = text => {
		const [r, g, b, a = 1] = text.match(/[\d.]+/g).map(Number);
		return [r, g, b, a];
	};
	const over = (top, below) => [0, 1, 2].map(i => top[i] * top[3] + below[i] * (1 - top[3])).concat(1);
	const luminance = ([r, g, b]) => {
		const [x, y, z] = [r, g, b].map(c => c / 255).map(c => c <= 0.03928 ? c / 12.92 : ((c + 0.055) / 1.055) ** 2.4);
		return 0.2126 * x + 0.7152 * y + 0.0722 * z;
	};
	const layers = [];
	for (let e = element; e; e = e.parentElement) layers.push(parse(getComputedStyle(e).backgroundColor));
	const behind = layers.reduceRight((below, top) => over(top, below), [255, 255, 255, 1]);
	const text = over(parse(getComputedStyle(element).color), behind);
	const [low, high] = [luminance(behind), luminance(text)].sort((a, b) => a - b);
	return (high + 0.05) / (low + 0.05);
};

// opaque tells whether the corners of an <svg> or <img>, drawn alone, let nothing through.
window.opaque = async picture => {
	const image = new Image();
	image.src = picture.tagName == 'IMG' ? picture.src
		: 'data:image/svg+xml,' + encodeURIComponent(new XMLSerializer().serializeToString(picture));
	await image.decode();
	const canvas = document.createElement('canvas');
	canvas.width = image.naturalWidth;
	canvas.height = image.naturalHeight;
	const context = canvas.getContext('2d');
	context.drawImage(image, 0, 0);
	const corners = [[1, 1], [canvas.width - 2, 1], [1, canvas.height - 2], [canvas.width - 2, canvas.height - 2]];
	return corners.every(([x, y]) => context.getImageData(x, y, 1, 1).data[3] == 255);
};
