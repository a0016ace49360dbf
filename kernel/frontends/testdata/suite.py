"""The Jupyter project's kernel test suite, told what Linewright's cells look like."""
import unittest

import jupyter_kernel_test


class LinewrightTests(jupyter_kernel_test.KernelTests):
    kernel_name = "linewright"
    language_name = "go"
    file_extension = ".go"
    code_hello_world = 'fmt.Println("hello, world")'
    code_stderr = 'import "os"\nfmt.Fprintln(os.Stderr, "oops")'
    completion_samples = [
        {"text": "strings.Fie", "matches": []},
        {"text": "math.Sqr", "matches": ["Sqrt", "Sqrt2", "SqrtE", "SqrtPhi", "SqrtPi"]},
        {"text": "linecode.AM", "matches": ["AMI"]},
    ]
    complete_code_samples = ["1+1", "x := 3", "func f() int {\n\treturn 1\n}", "// only a comment"]
    incomplete_code_samples = ["func f() {", "fmt.Println(", "x := []int{1,", "for i := 0; i < 3; i++ {\n"]
    invalid_code_samples = ["import = 7q", "func = }", "x := )"]
    code_generate_error = 'panic("no such line")'
    code_execute_result = [
        {"code": "6*7", "result": "42"},
        {"code": '"AM" + "I"', "result": "AMI"},
        {"code": "linecode.AMI()", "mime": "text/html"},
    ]
    code_display_data = [
        {"code": "page.Show(linecode.AMI())", "mime": "text/html"},
        {
            "code": "p, err := spectrum.Exact(linecode.AMI(), pulse.Train{})\npage.Show(plotting.Spectrum(p))",
            "mime": "image/svg+xml",
        },
    ]
    code_history_pattern = "6?7"
    supported_history_operations = ("tail", "range", "search")
    code_inspect_sample = "linecode.AMI"
    code_clear_output = "page.Clear()"


if __name__ == "__main__":
    unittest.main()
