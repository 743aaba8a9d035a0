"""jupyter_kernel_test against the installed kernel, every sample filled in."""
import unittest

import jupyter_kernel_test
from jupyter_kernel_test import msgspec_v5

# Version 0.4.5 validates messages as they come from jupyter_client, which adds msg_type and msg_id beside the header;
# its own schema knows neither.
_validate = msgspec_v5.validate_message


def validate_message(msg, msg_type=None, parent=None):
    return _validate({k: v for k, v in msg.items() if k not in ("msg_type", "msg_id")}, msg_type, parent)


jupyter_kernel_test.validate_message = validate_message


class GuardringKernel(jupyter_kernel_test.KernelTests):
    kernel_name = "guardring"
    language_name = "go"
    file_extension = ".go"

    code_hello_world = 'import "fmt"\nfmt.Println("hello, world")'
    code_stderr = 'import ("fmt"; "os")\nfmt.Fprintln(os.Stderr, "to standard error")'
    completion_samples = [
        {"text": "fallth", "matches": {"fallthrough"}},
        {"text": "strings.ToUpp", "matches": {"ToUpper", "ToUpperSpecial"}},
        {"text": "display.Markd", "matches": {"Markdown", "Markdowner"}},
    ]
    complete_code_samples = [
        "1 + 1", "x := 3", "func f() int {\n\treturn 1\n}", 'import "fmt"', "", "// a comment",
        "for i := 0; i < 3; i++ {\n}", "`a raw\nstring`",
    ]
    incomplete_code_samples = ["func f() int {", "for i := 0; i < 3; i++ {", "f(1,", "x :=", "`raw", "1 +"]
    invalid_code_samples = ["f(1))", "x := := 3", "func 3() {}", '"no end']
    code_page_something = "%doc display"
    code_generate_error = 'panic("as asked")'
    code_execute_result = [
        {"code": "1+2+3", "result": "6"},
        {"code": '"a" + "b"', "result": "ab"},
        {"code": 'display.HTML("<b>x</b>")', "mime": "text/html", "result": "<b>x</b>"},
        {"code": "[]int{1, 2}", "result": "[1 2]"},
    ]
    code_display_data = [
        {"code": 'Display(display.SVG("<svg/>"))', "mime": "image/svg+xml"},
        {"code": 'import "example.org/guardring/pkg/cell"\ncell.Display(3)', "mime": "text/plain"},
    ]
    supported_history_operations = ("tail", "range", "search")
    code_history_pattern = "1?2*"
    code_inspect_sample = "display"
    code_clear_output = 'import "example.org/guardring/pkg/cell"\ncell.Clear(false)'

    def test_completion(self):
        # Something to complete must be in scope first.
        self.execute_helper('import "strings"')
        super().test_completion()


if __name__ == "__main__":
    result = unittest.main(exit=False, verbosity=2).result
    if result.skipped:
        print("skipped:", [(str(t), r) for t, r in result.skipped])
    raise SystemExit(0 if result.wasSuccessful() and not result.skipped and result.testsRun >= 12 else 1)
