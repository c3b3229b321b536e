"""The C around the code on trial. It feeds a whole vector: nothing crosses into the program sample by sample."""

from __future__ import annotations

from realize.trial.emitted import Code

#: The file with the harness, among the sources.
FILE = "trial_harness.c"

#: The function that feeds a vector, and the state it feeds it to.
RUN, STATE = "trial_run", "trial_state"

#: Where a program lies: code and constants at 64 KiB, data where these processors have their memory.
SCRIPT = """SECTIONS
{
    . = 0x00010000;
    .text : { *(.text .text.*) }
    .rodata : { *(.rodata .rodata.* .srodata .srodata.*) }
    . = 0x20000000;
    .data : { *(.data .data.* .sdata .sdata.*) }
    .bss : { *(.bss .bss.* .sbss .sbss.* COMMON) }
    /DISCARD/ : { *(.ARM.exidx* .ARM.extab* .comment .eh_frame* .note*) }
}
"""

_ON_TARGET = """
void trial_run(const {input} *inputs, {output} *outputs, unsigned long count);

void trial_run(const {input} *inputs, {output} *outputs, unsigned long count)
{{
    unsigned long k;
    {name}_clear(&trial_state);
    for (k = 0; k < count; k++) {{
        const {input} *const given = inputs + {width} * k;
        outputs[k] = {sample};
    }}
}}

/* Keeps every function in the program, from its beginning. A trial calls trial_run instead. */
typedef void (*trial_function)(void);
static const volatile trial_function trial_kept[] = {{
    (trial_function)trial_run,
{kept}
}};

int main(void)
{{
    return trial_kept[0] == 0;
}}
"""

_ON_HOST = """
#include <stdio.h>

/* Arguments: a file of inputs, and one for the answers. Prints the size of the state. */
int main(int count, char **arguments)
{{
    {input} given[{width}];
    {output} output;
    FILE *inputs = count == 3 ? fopen(arguments[1], "rb") : NULL;
    FILE *outputs = count == 3 ? fopen(arguments[2], "wb") : NULL;
    if (inputs == NULL || outputs == NULL) {{
        return 1;
    }}
    setvbuf(outputs, NULL, _IONBF, 0);
    {name}_clear(&trial_state);
    while (fread(given, sizeof given, 1, inputs) == 1) {{
        output = {sample};
        fwrite(&output, sizeof output, 1, outputs);
    }}
    printf("%lu\\n", (unsigned long)sizeof trial_state);
    return fclose(outputs) == 0 ? 0 : 1;
}}
"""


def harness_text(code: Code, *, on_host: bool) -> str:
    """The source beside the code: a program that works on files, or ``trial_run`` for an emulator to call."""
    kept = ",\n".join(f"    (trial_function){code.name}_{function}" for function in code.functions)
    body = (_ON_HOST if on_host else _ON_TARGET).format(
        name=code.name,
        input=code.input_type,
        output=code.output_type,
        sample=_sample(code),
        width=2 if code.scheduled else 1,
        kept=kept,
    )
    coefficients = f"static {code.name}_coefficients trial_coefficients;\n" if code.scheduled else ""
    return f'#include "{code.header}"\n\nstatic {code.name}_state trial_state;\n{coefficients}{body}'


def _sample(code: Code) -> str:
    """The answer to what is given: an input, or the variable of a schedule and an input."""
    if code.scheduled:
        looked_up = f"{code.name}_at(given[0], &trial_coefficients)"
        return f"({looked_up}, {code.name}_update(&trial_state, &trial_coefficients, given[1]))"
    arguments = f"&trial_state, &{code.name}_nominal" if code.table else "&trial_state"
    return f"{code.name}_update({arguments}, given[0])"
