// A page with JupyterLab's own client, output area and renderer, and nothing else of it.
//
// window.lab.start(kernel, token) starts a kernel, window.lab.run(code, trusted) runs a cell and shows its output below
// the last one's; both return a promise.
import { KernelManager, ServerConnection } from '@jupyterlab/services';
import { OutputArea, OutputAreaModel } from '@jupyterlab/outputarea';
import { RenderMimeRegistry, standardRendererFactories } from '@jupyterlab/rendermime';
import { Widget } from '@lumino/widgets';
import '@jupyterlab/outputarea/style/index.js';

let kernel;

async function start(name, token) {
	document.body.replaceChildren();
	document.body.className = 'jp-ThemedContainer';
	const serverSettings = ServerConnection.makeSettings({
		baseUrl: location.origin + '/', wsUrl: location.origin.replace(/^http/, 'ws') + '/', token,
	});
	kernel = await new KernelManager({ serverSettings }).startNew({ name });
	await kernel.info;
}

async function run(code, trusted) {
	const input = document.createElement('pre');
	input.textContent = code;
	document.body.append(input);
	const area = new OutputArea({
		model: new OutputAreaModel({ trusted }),
		rendermime: new RenderMimeRegistry({ initialFactories: standardRendererFactories }),
	});
	area.node.style.marginBottom = '1em';
	Widget.attach(area, document.body);
	area.future = kernel.requestExecute({ code, allow_stdin: true }, false); // false: listens for later updates, as a notebook does
	await area.future.done;
}

window.lab = { start, run };
