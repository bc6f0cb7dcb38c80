"""C on emulated microcontroller cores: bytes of an image, and executed instructions of single calls.

`build` cross-compiles and links, `sizes` measures the image, `Board` runs functions of it, `count_function` does the three
for one function, `count_newlib` for a function of the C library newlib, for comparison. Nothing here measures cycles: flash wait
states and the pipeline are not modelled.

Needs the optional group `bench` (unicorn, pyelftools, ziglang). The second compiler, GCC, and newlib are Debian packages.
"""

from __future__ import annotations

import importlib.util
import io
import re
import shutil
import statistics
import sys
import tempfile
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, NamedTuple

from hybgen.sil.toolchain import CompilerRefused, run

try:
    from elftools.elf.elffile import ELFFile
    from unicorn import UC_ARCH_ARM, UC_HOOK_BLOCK, UC_MODE_THUMB, Uc, arm_const
except ModuleNotFoundError as error:
    raise SystemExit(f"{error.name} is missing; run: pip install '.[bench]'") from None

FLASH, RAM, RETURN = 0x0800_0000, 0x2000_0000, 0x7FFF_0000
BANK = 0x10_0000
"""Bytes of flash and of RAM: more than any such core has, so that nothing fails for room."""
STACK, ROOM = RAM + BANK, BANK // 4
"""The stack begins here and has this many bytes."""
DATA = RAM + BANK // 4
"""From here on half of the RAM is free for the caller."""
_PAINT = b"\xa5"
_ARGUMENTS = (arm_const.UC_ARM_REG_R0, arm_const.UC_ARM_REG_R1, arm_const.UC_ARM_REG_R2, arm_const.UC_ARM_REG_R3)

_LINK = """SECTIONS {
  .text 0x08000000 : { *(.text*) }
  .rodata : { *(.rodata*) }
  .data 0x20000000 : { *(.data*) }
  .bss : { *(.bss*) *(COMMON) }
  /DISCARD/ : { *(.ARM.exidx*) *(.ARM.extab*) *(.eh_frame*) *(.comment) }
}
"""
_FLAGS = (
    *("-std=c99", "-ffp-contract=off", "-ffreestanding", "-fno-unwind-tables", "-fno-asynchronous-unwind-tables"),
    *("-fomit-frame-pointer", "-ffunction-sections", "-fdata-sections", "-fno-short-enums", "-g"),
)
_PACKAGES = "apt-get install gcc-arm-none-eabi libnewlib-arm-none-eabi"


class MissingTool(Exception):
    """A tool that was asked for is not installed; the message says how to get it."""


@dataclass(frozen=True, slots=True)
class Core:
    """A processor core: how each compiler is told of it, and its model in the emulator."""

    name: str
    zig: tuple[str, ...]
    gcc: tuple[str, ...]
    model: int
    fpu: bool
    """Does it compute in float32 by itself?"""


CORES: dict[str, Core] = {
    c.name: c
    for c in (
        Core(
            "cortex-m0",
            ("-target", "thumb-freestanding-eabi", "-mcpu=cortex_m0"),
            ("-mcpu=cortex-m0", "-mthumb", "-mfloat-abi=soft"),
            arm_const.UC_CPU_ARM_CORTEX_M0,
            False,
        ),
        Core(  # plain cortex_m4 would be taken without its FPU, and nothing would say so
            "cortex-m4f",
            ("-target", "thumb-freestanding-eabihf", "-mcpu=cortex_m4+vfp4d16sp"),
            ("-mcpu=cortex-m4", "-mthumb", "-mfloat-abi=hard", "-mfpu=fpv4-sp-d16"),
            arm_const.UC_CPU_ARM_CORTEX_M4,
            True,
        ),
    )
}
COMPILERS = ("zig", "gcc")
OPTIMISATIONS = ("-O2", "-Os")


@dataclass(frozen=True, slots=True)
class Sizes:
    """Bytes in flash."""

    code: int
    constants: int
    """Initialised variables count here: their values lie in flash too."""

    @property
    def total(self) -> int:
        """Both together."""
        return self.code + self.constants


@dataclass(frozen=True, slots=True)
class Elf:
    """A linked image."""

    segments: tuple[tuple[int, bytes], ...]
    """Address and content of what has to be loaded."""
    symbols: Mapping[str, int]
    """Addresses of functions and objects; a function's is odd (Thumb)."""
    linked: Sizes
    """The whole image."""
    objects: Mapping[str, Sizes]
    """What each source compiled to, by its file name; before linking, so also what the linker then left out."""
    runtime: int
    """Bytes of functions and objects that come from no source, but from the compiler's libraries."""


def _command(compiler: str, core: Core) -> tuple[str, ...]:
    """The cross-compiler for a core. Raises MissingTool."""
    assert compiler in COMPILERS, compiler
    if compiler == "gcc":
        if shutil.which("arm-none-eabi-gcc") is None:
            raise MissingTool(f"arm-none-eabi-gcc is missing; run: {_PACKAGES}")
        return ("arm-none-eabi-gcc", *core.gcc)
    if importlib.util.find_spec("ziglang") is None:
        raise MissingTool("ziglang is missing; run: pip install '.[bench]'")
    return (sys.executable, "-m", "ziglang", "cc", *core.zig, "-fno-sanitize=undefined", "-fno-stack-protector")


def build(
    sources: Mapping[str, str],
    core: str,
    opt: str,
    *,
    compiler: str = "zig",
    roots: Sequence[str] | None = None,
    libraries: Sequence[str] = (),
) -> Elf:
    """Compiles each *.c of the sources (file name -> text; the others are for #include) and links them with the compiler's runtime.

    Kept is what `roots` reach; left out: all global names of the sources. `libraries`: options for the linker. Raises
    MissingTool, hybgen.sil.toolchain.CompilerRefused.
    """
    command = (*_command(compiler, CORES[core]), opt, *_FLAGS)
    with tempfile.TemporaryDirectory(prefix="hybgen-") as place:
        folder = Path(place)
        for name, text in {**sources, "link.ld": _LINK}.items():
            (folder / name).write_text(text, encoding="utf-8")
        made = [name for name in sources if name.endswith(".c")]
        for name in made:
            run([*command, "-c", name, "-o", f"{name}.o"], folder)
        parts = {name: (folder / f"{name}.o").read_bytes() for name in made}
        defined = [_defined(part) for part in parts.values()]
        kept = list(roots if roots is not None else [n for names in defined for n, outward in names.items() if outward])
        options = ["-nostartfiles"] if compiler == "gcc" else []
        options += [f"-Wl,--entry={kept[0]}", *(f"-Wl,-u,{n}" for n in kept), "-Wl,--gc-sections", "-Wl,-T,link.ld"]
        run([*command, *options, *(f"{n}.o" for n in made), *libraries, "-o", "image.elf"], folder)
        image = (folder / "image.elf").read_bytes()
    return _read(image, {n: _sections(p) for n, p in parts.items()}, {n for names in defined for n in names})


def _defined(part: bytes) -> dict[str, bool]:
    """Functions and objects that an object file defines; is the name seen from outside?"""
    return {name: outward for name, _, _, outward in _symbols(ELFFile(io.BytesIO(part)))}


def _symbols(elf: Any) -> Iterable[tuple[str, int, int, bool]]:
    """Name, address, size of each function and object, and whether it is seen from outside."""
    for symbol in elf.get_section_by_name(".symtab").iter_symbols():
        if symbol["st_info"]["type"] in ("STT_FUNC", "STT_OBJECT") and symbol["st_shndx"] != "SHN_UNDEF":
            yield symbol.name, symbol["st_value"], symbol["st_size"], symbol["st_info"]["bind"] != "STB_LOCAL"


def _sections(content: bytes) -> Sizes:
    """Bytes of what an ELF file puts into flash; unwind tables are no part of a firmware."""
    code = constants = 0
    for section in ELFFile(io.BytesIO(content)).iter_sections():
        if section["sh_type"] == "SHT_PROGBITS" and section["sh_flags"] & 2:  # SHF_ALLOC
            if section["sh_flags"] & 4:  # SHF_EXECINSTR
                code += section["sh_size"]
            else:
                constants += section["sh_size"]
    return Sizes(code, constants)


def _read(image: bytes, objects: Mapping[str, Sizes], own: set[str]) -> Elf:
    elf = ELFFile(io.BytesIO(image))
    segments = tuple(
        (s["p_vaddr"], s.data()) for s in elf.iter_segments() if s["p_type"] == "PT_LOAD" and s["p_filesz"]
    )
    symbols = list(_symbols(elf))
    foreign = {(address & ~1, size) for name, address, size, _ in symbols if name not in own}
    return Elf(
        segments,
        {name: address for name, address, _, _ in symbols},
        _sections(image),
        objects,
        len({a for start, size in foreign for a in range(start, start + size) if FLASH <= a < FLASH + BANK}),
    )


def sizes(elf: Elf, symbol_prefix: str) -> Sizes:
    """Bytes of the sources whose file names begin with the prefix that their symbols have (NAME.c of law NAME)."""
    found = [s for name, s in elf.objects.items() if name.startswith(symbol_prefix)]
    assert found, f"none of {', '.join(elf.objects)} begins with {symbol_prefix}"
    return Sizes(sum(s.code for s in found), sum(s.constants for s in found))


class Board:
    """A core with flash and RAM that holds one image. Faults of the core raise unicorn.UcError."""

    def __init__(self, elf: Elf, core: str) -> None:
        self.elf = elf
        self.instructions = 0
        """Executed by all calls so far; what stands behind an unmet condition of an IT block counts, as it takes its time."""
        self._lengths: dict[tuple[int, int], int] = {}
        self._machine = Uc(UC_ARCH_ARM, UC_MODE_THUMB)  # the mode for M cores would override the model
        self._machine.ctl_set_cpu_model(CORES[core].model)
        for start in (FLASH, RAM):
            self._machine.mem_map(start, BANK)
        self._machine.mem_map(RETURN, 0x1000)
        self._machine.mem_write(STACK - ROOM, _PAINT * ROOM)
        for start, content in elf.segments:
            self._machine.mem_write(start, content)
        self._machine.hook_add(UC_HOOK_BLOCK, self._block)  # before the first call: translated blocks are kept

    def _block(self, machine: Any, address: int, size: int, _: Any) -> None:
        length = self._lengths.get((address, size))
        if length is None:
            length = self._lengths[address, size] = _thumb_instructions(bytes(machine.mem_read(address, size)))
        self.instructions += length

    def call(self, symbol: str, *args: int) -> int:
        """Calls a function with 32-bit words in r0..r3 and gives r0 as it is after the return."""
        assert len(args) <= len(_ARGUMENTS)
        for register, word in zip(_ARGUMENTS, args, strict=False):
            self._machine.reg_write(register, word)
        self._machine.reg_write(arm_const.UC_ARM_REG_SP, STACK)
        self._machine.reg_write(arm_const.UC_ARM_REG_LR, RETURN | 1)
        self._machine.emu_start(self.elf.symbols[symbol] | 1, RETURN)
        assert self._machine.reg_read(arm_const.UC_ARM_REG_PC) == RETURN, f"{symbol} did not return"
        return int(self._machine.reg_read(arm_const.UC_ARM_REG_R0))

    @property
    def second(self) -> int:
        """r1 as it is: after a call of a function with a 64-bit result, its upper word."""
        return int(self._machine.reg_read(arm_const.UC_ARM_REG_R1))

    @property
    def stack(self) -> int:
        """Bytes of the stack that the deepest call so far has written to."""
        return len(self.read(STACK - ROOM, ROOM).lstrip(_PAINT))

    def read(self, address: int, size: int) -> bytes:
        """Bytes of the memory."""
        return bytes(self._machine.mem_read(address, size))

    def write(self, address: int, content: bytes) -> None:
        """Changes the memory."""
        self._machine.mem_write(address, content)


def _thumb_instructions(code: bytes) -> int:
    """Instructions in a block; those whose first halfword begins with 11101, 11110, 11111 have two (ARMv7-M manual, A5.1)."""
    place = count = 0
    while place < len(code):
        place += 4 if code[place + 1] >> 3 in (0b11101, 0b11110, 0b11111) else 2
        count += 1
    assert place == len(code)
    return count


class Counted(NamedTuple):
    """What a function costs."""

    bytes: int
    """Code and constants of the function and of all that it calls, the compiler's runtime included."""
    mean: float
    """Instructions of a call, the return included; mean over the calls."""
    most: int


def count_function(
    c_source: str,
    symbol: str,
    args_list: Sequence[Sequence[int]],
    core: str,
    opt: str,
    *,
    compiler: str = "zig",
) -> Counted:
    """Builds one C source and calls one global function of it with each row of at most four 32-bit words.

    A wrapper that takes float bits as uint32_t costs a move for each on a core with FPU; they count. Raises MissingTool,
    hybgen.sil.toolchain.CompilerRefused.
    """
    elf = build({"function.c": c_source}, core, opt, compiler=compiler, roots=[symbol])
    return measure(elf, symbol, args_list, core)[0]


def measure(
    elf: Elf, symbol: str, args_list: Sequence[Sequence[int]], core: str
) -> tuple[Counted, list[tuple[int, int]]]:
    """Calls a function with each row of words; what it costs (bytes of the whole image), and r0 and r1 after each call."""
    board = Board(elf, core)
    counts: list[int] = []
    answers: list[tuple[int, int]] = []
    for args in args_list:
        before = board.instructions
        answers.append((board.call(symbol, *args), board.second))
        counts.append(board.instructions - before)
    return Counted(elf.linked.total, statistics.fmean(counts), max(counts)), answers


_NEWLIB = re.compile(r"(sin|cos|tan|asin|acos|atan|exp|log|tanh|sqrt|cbrt)(f?)|(atan2|hypot|pow|fmod)(f?)")


def newlib_source(function: str) -> str:
    """C of `bench_FUNCTION`, which takes and gives the bits of a function of <math.h>: a double is two words, lower first."""
    found = _NEWLIB.fullmatch(function)
    assert found, function
    two, single = found[3] is not None, (found[2] or found[4]) == "f"
    number, word = ("float", "uint32_t") if single else ("double", "uint64_t")
    names = ["x", "y"] if two else ["x"]
    return "\n".join(
        [
            "#include <math.h>\n#include <stdint.h>",
            f"typedef union {{ {number} number; {word} bits; }} bench_bits;",
            f"{word} bench_{function}({', '.join(f'{word} {n}' for n in names)})\n{{",
            f"    bench_bits {', '.join([*(f'b{n}' for n in names), 'r'])};",
            *(f"    b{n}.bits = {n};" for n in names),
            f"    r.number = {function}({', '.join(f'b{n}.number' for n in names)});",
            "    return r.bits;\n}\n",
        ]
    )


def build_newlib(function: str, core: str, opt: str) -> Elf:
    """`bench_FUNCTION` linked with newlib by GCC, errno as usual; really called, as -ffreestanding builds in no instruction for it.

    Raises MissingTool.
    """
    sources = {"newlib.c": newlib_source(function)}
    libraries = ["-Wl,--no-enum-size-warning", "-lm", "-lc", "-lgcc"]
    try:
        return build(sources, core, opt, compiler="gcc", roots=[f"bench_{function}"], libraries=libraries)
    except CompilerRefused as refused:
        if "math.h: No such file" in str(refused):
            raise MissingTool(f"newlib is missing; run: {_PACKAGES}") from None
        raise


def count_newlib(function: str, args_list: Sequence[Sequence[int]], core: str, opt: str) -> Counted:
    """What a function of newlib's <math.h> costs; arguments as in newlib_source. Raises MissingTool."""
    return measure(build_newlib(function, core, opt), f"bench_{function}", args_list, core)[0]


_KNOWN = """#include <stdint.h>
typedef union { float number; uint32_t bits; } bench_bits;
__attribute__((naked)) void bench_loop(uint32_t n);
__attribute__((naked)) void bench_loop(uint32_t n)
{
    __asm__(".syntax unified\\n1: subs r0, r0, #1\\n bne 1b\\n bl 2f\\n 2: nop\\n nop\\n bx r1");
}
uint32_t bench_product(uint32_t x, uint32_t y);
uint32_t bench_product(uint32_t x, uint32_t y)
{
    bench_bits a, b;
    a.bits = x;
    b.bits = y;
    a.number *= b.number;
    return a.bits;
}
"""


def check_core(core: str, *, compiler: str = "zig") -> None:
    """Checks counter, arithmetic and FPU on code whose count is known: an AssertionError would be a fault in this file."""
    board = Board(build({"known.c": _KNOWN}, core, "-O2", compiler=compiler), core)
    for turns in (1, 2, 1000):
        before = board.instructions
        board.call("bench_loop", turns, RETURN | 1)
        assert board.instructions - before == 2 * turns + 4, (core, turns, board.instructions - before)
    before = board.instructions
    assert board.call("bench_product", 0x3FC00000, 0xC0200000) == 0xC0700000  # 1.5 * -2.5 = -3.75
    assert (board.instructions - before < 10) == CORES[core].fpu, f"{core}: the compiler took it for another core"
