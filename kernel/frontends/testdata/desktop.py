"""Types cells into the desktop console and looks at its window: text, a result, an error, an inline picture.

Usage: desktop.py SCREENSHOT.png
"""
import re
import sys
import time

from qtpy import QtCore, QtGui
from qtpy.QtTest import QTest
from qtconsole.qtconsoleapp import JupyterQtConsoleApp

app = JupyterQtConsoleApp()
app.initialize(["--kernel", "linewright", "--no-confirm-exit"])
app.window.resize(900, 960)
app.window.show()
console = app.window.active_frontend
document = console._control.document()


def until(what, condition):
    """Lets the window work until the condition holds."""
    deadline = time.monotonic() + 30
    while not condition():
        assert time.monotonic() < deadline, f"{what}: did not happen; the window shows\n{document.toPlainText()}"
        app.app.processEvents(QtCore.QEventLoop.AllEvents, 50)
        time.sleep(0.01)


def prompt(number):
    """Waits for an empty prompt of a number."""
    # the prompt is written with spaces that do not break
    until(f"prompt {number}", lambda: re.search(rf"In \[{number}\]:\s*$", document.toPlainText().replace("\xa0", " ")))


def enter(line):
    """Types a cell key by key and the return key that runs it."""
    QTest.keyClicks(console._control, line)
    until("typed " + line, lambda: console.input_buffer == line)
    QTest.keyClick(console._control, QtCore.Qt.Key_Return)


def pictures():
    """Returns the pictures of the document, as they are drawn."""
    found, block = [], document.begin()
    while block.isValid():
        fragments = block.begin()
        while not fragments.atEnd():
            style = fragments.fragment().charFormat()
            if style.isImageFormat():
                name = style.toImageFormat().name()
                found.append(QtGui.QImage(document.resource(QtGui.QTextDocument.ImageResource, QtCore.QUrl(name))))
            fragments += 1
        block = block.next()
    return found


try:
    prompt(1)
    enter('fmt.Println("levels", linecode.AMI().Levels())')
    until("text", lambda: "levels [-1 0 1]" in document.toPlainText())
    prompt(2)
    enter("linecode.AMI().Levels()")
    prompt(3)
    assert "Out[2]: [-1 0 1]" in document.toPlainText().replace("\xa0", " "), document.toPlainText()
    enter('uint8(1) + "x"')
    prompt(4)
    assert "mismatched types" in document.toPlainText() and "\x1b" not in document.toPlainText(), document.toPlainText()
    enter("p, err := spectrum.Exact(linecode.AMI(), pulse.Train{SymbolRate: 1e6})")
    prompt(5)
    enter("plotting.Spectrum(p)")
    prompt(6)
    shown = pictures()
    app.window.grab().save(sys.argv[1])
    assert len(shown) == 1, f"{len(shown)} pictures"
    picture = shown[0]
    assert 300 < picture.width() < 1000, (picture.width(), picture.height())
    points = [picture.pixelColor(x, y) for x in range(0, picture.width()) for y in range(0, picture.height())]
    blue = QtGui.QColor("#0072b2")  # the first colour of the figures' palette
    drawn = sum(p.red() == blue.red() and p.green() == blue.green() and p.blue() == blue.blue() for p in points)
    assert drawn > picture.width() / 4, f"{drawn} pixels of the curve"
    assert all(p.alpha() == 255 for p in points), "the picture lets the window shine through"
    print(f"text, a result, an error and a picture of {picture.width()} x {picture.height()}")
finally:
    app.window.close()  # which ends the kernel
