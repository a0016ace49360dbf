"""Drives the kernel with jupyter_client as a batch tool would: outputs, errors, interrupts, questions, a restart."""
import time

from jupyter_client.manager import start_new_kernel


def execute(kc, code, answer=None):
    """Runs a cell and returns its reply and its outputs."""
    outputs = []
    reply = kc.execute_interactive(
        code,
        timeout=30,
        allow_stdin=answer is not None,
        output_hook=outputs.append,
        stdin_hook=lambda m: kc.input(answer),
    )
    return reply["content"], outputs


def text(outputs, name):
    return "".join(m["content"]["text"] for m in outputs if m["msg_type"] == "stream" and m["content"]["name"] == name)


km, kc = start_new_kernel(kernel_name="linewright")
try:
    reply, outputs = execute(kc, "x := 3\nfmt.Println(x)\nx * 14")
    assert reply["status"] == "ok" and reply["execution_count"] == 1, reply
    assert text(outputs, "stdout") == "3\n", outputs
    results = [m for m in outputs if m["msg_type"] == "execute_result"]
    assert [m["content"]["data"]["text/plain"] for m in results] == ["42"], results

    reply, outputs = execute(kc, "uint8(200) + 100")
    assert reply["status"] == "error", reply
    assert "100" in reply["evalue"], reply

    reply, outputs = execute(kc, 'fmt.Println("got", page.Ask("candidate? "))', answer="żaba")
    assert text(outputs, "stdout") == "got żaba\n", outputs

    msg_id = kc.execute("for {\n}")
    time.sleep(0.5)
    started = time.monotonic()
    km.interrupt_kernel()
    while True:
        reply = kc.get_shell_msg(timeout=10)
        if reply["parent_header"]["msg_id"] == msg_id:
            break
    assert reply["content"]["status"] == "error", reply
    assert time.monotonic() - started < 2, "the interrupt took too long"
    reply, outputs = execute(kc, "x")
    assert [m["content"]["data"]["text/plain"] for m in outputs if m["msg_type"] == "execute_result"] == ["3"], outputs

    km.restart_kernel(now=False)
    kc.wait_for_ready(timeout=30)
    reply, outputs = execute(kc, "x")
    assert reply["status"] == "error" and reply["execution_count"] == 1, reply
    print("text, results, errors, questions, interrupts and a restart behave")
finally:
    kc.stop_channels()
    km.shutdown_kernel()
