//! Bytes of the few x86-64 instructions that [`super::wide_code`] needs: 256-bit arithmetic on four doubles (VEX encoding,
//! AVX2 and FMA) and the integer instructions around a loop.
//!
//! Source of the encodings: Intel 64 and IA-32 Architectures Software Developer's Manual, volume 2, sections 2.1 and 2.3
//! (ModRM, SIB and VEX prefixes) and the instruction pages. The tests compare with an independent assembler.

/// A 256-bit register, ymm0 to ymm15.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct Vector(pub u8);

/// A 64-bit register by its number in encodings.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) struct General(pub u8);

impl General {
    pub(super) const RAX: Self = Self(0);
    pub(super) const RCX: Self = Self(1);
    pub(super) const RDX: Self = Self(2);
    pub(super) const RBX: Self = Self(3);
    pub(super) const RBP: Self = Self(5);
    pub(super) const RSI: Self = Self(6);
    pub(super) const RDI: Self = Self(7);
    pub(super) const R8: Self = Self(8);
    pub(super) const R9: Self = Self(9);
    pub(super) const R10: Self = Self(10);
    pub(super) const R11: Self = Self(11);
    pub(super) const R12: Self = Self(12);
    pub(super) const R13: Self = Self(13);
    pub(super) const R14: Self = Self(14);
    pub(super) const R15: Self = Self(15);
}

/// A place in memory.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Memory {
    /// `base + index + displacement`
    At { base: General, index: Option<General>, displacement: i32 },
    /// A number of the pool behind the code, see [`Assembler::constant`].
    Pool(usize),
}

/// The last operand of an instruction.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Operand {
    Register(Vector),
    Memory(Memory),
}

/// Instructions `result = first OP second` on four doubles each.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Packed {
    Add,
    Subtract,
    Multiply,
    Divide,
    /// `first < second ? first : second`, so the second operand where either is NaN or both are zero.
    Minimum,
    /// `first > second ? first : second`, likewise.
    Maximum,
    And,
    Or,
    ExclusiveOr,
}

/// Fused instructions; each overwrites one of its operands.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Fused {
    /// `a*b + c`
    MultiplyAdd,
    /// `a*b - c`
    MultiplySubtract,
    /// `c - a*b`
    NegateMultiplyAdd,
}

/// Which operand a fused instruction overwrites; the digits are those of the mnemonics.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum FusedForm {
    /// `result = result*last + middle`
    Form132,
    /// `result = middle*result + last`
    Form213,
    /// `result = middle*last + result`
    Form231,
}

/// Comparisons that make a mask; none of them traps on a quiet NaN.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub(super) enum Comparison {
    Less = 0x11,
    LessEqual = 0x12,
    Greater = 0x1E,
    /// True where either is NaN, too.
    NotEqual = 0x04,
    /// Either is NaN.
    Unordered = 0x03,
}

/// Opcode maps of VEX.
#[derive(Clone, Copy)]
enum Map {
    Of0F = 1,
    Of0F38 = 2,
    Of0F3A = 3,
}

/// Bytes of a vector of four doubles.
pub(super) const VECTOR: usize = 32;

/// Writes instructions one after the other, and a pool of constants behind them.
#[derive(Default)]
pub(super) struct Assembler {
    code: Vec<u8>,
    /// Bits of constants that the code reads, each four times.
    pool: Vec<u64>,
    /// Places of 4 bytes that wait for the distance to a constant: (place, end of the instruction, constant).
    pool_references: Vec<(usize, usize, usize)>,
}

impl Assembler {
    /// Number of bytes so far: where the next instruction stands.
    pub(super) fn position(&self) -> usize {
        self.code.len()
    }

    /// The code with its constants.
    pub(super) fn finish(mut self) -> Vec<u8> {
        self.align();
        let pool = self.code.len();
        for bits in &self.pool {
            (0..4).for_each(|_| self.code.extend(bits.to_le_bytes()));
        }
        for (place, end, constant) in self.pool_references {
            let distance = (pool + VECTOR * constant) as i64 - end as i64;
            self.code[place..place + 4].copy_from_slice(&(distance as i32).to_le_bytes());
        }
        self.code
    }

    /// A vector of four equal constants in the pool.
    pub(super) fn constant(&mut self, bits: u64) -> Memory {
        let known = self.pool.iter().position(|&constant| constant == bits);
        Memory::Pool(known.unwrap_or_else(|| {
            self.pool.push(bits);
            self.pool.len() - 1
        }))
    }

    /// Fills up to a multiple of 32 bytes.
    pub(super) fn align(&mut self) {
        const NO_OPERATION: u8 = 0x90;
        self.code.resize(self.code.len().next_multiple_of(VECTOR), NO_OPERATION);
    }

    pub(super) fn packed(&mut self, operation: Packed, result: Vector, first: Vector, second: Operand) {
        let opcode = match operation {
            Packed::Add => 0x58,
            Packed::Subtract => 0x5C,
            Packed::Multiply => 0x59,
            Packed::Divide => 0x5E,
            Packed::Minimum => 0x5D,
            Packed::Maximum => 0x5F,
            Packed::And => 0x54,
            Packed::Or => 0x56,
            Packed::ExclusiveOr => 0x57,
        };
        self.vector(Map::Of0F, false, opcode, result.0, first.0, second, None);
    }

    pub(super) fn square_root(&mut self, result: Vector, operand: Operand) {
        self.vector(Map::Of0F, false, 0x51, result.0, 0, operand, None);
    }

    pub(super) fn compare(&mut self, comparison: Comparison, mask: Vector, first: Vector, second: Operand) {
        self.vector(Map::Of0F, false, 0xC2, mask.0, first.0, second, Some(comparison as u8));
    }

    /// `result = mask ? yes : no`
    pub(super) fn blend(&mut self, result: Vector, no: Vector, yes: Operand, mask: Vector) {
        self.vector(Map::Of0F3A, false, 0x4B, result.0, no.0, yes, Some(mask.0 << 4));
    }

    pub(super) fn fused(&mut self, kind: Fused, form: FusedForm, result: Vector, middle: Vector, last: Operand) {
        let kind = match kind {
            Fused::MultiplyAdd => 0x8,
            Fused::MultiplySubtract => 0xA,
            Fused::NegateMultiplyAdd => 0xC,
        };
        let form = match form {
            FusedForm::Form132 => 0x90,
            FusedForm::Form213 => 0xA0,
            FusedForm::Form231 => 0xB0,
        };
        self.vector(Map::Of0F38, true, form | kind, result.0, middle.0, last, None);
    }

    /// Loads or copies a vector; memory needs no alignment.
    pub(super) fn load(&mut self, result: Vector, from: Operand) {
        self.vector(Map::Of0F, false, 0x10, result.0, 0, from, None);
    }

    pub(super) fn store(&mut self, to: Memory, value: Vector) {
        self.vector(Map::Of0F, false, 0x11, value.0, 0, Operand::Memory(to), None);
    }

    /// Clears the upper halves of all vectors, as code with older encodings expects.
    pub(super) fn clear_upper_halves(&mut self) {
        self.code.extend([0xC5, 0xF8, 0x77]);
    }

    pub(super) fn load_pointer(&mut self, result: General, from: Memory) {
        self.wide_prefix(result, from);
        self.code.push(0x8B);
        self.address(result.0, from, 0);
    }

    pub(super) fn push(&mut self, register: General) {
        self.short_prefix(register);
        self.code.push(0x50 | (register.0 & 7));
    }

    pub(super) fn pop(&mut self, register: General) {
        self.short_prefix(register);
        self.code.push(0x58 | (register.0 & 7));
    }

    /// Sets a register to zero.
    pub(super) fn clear(&mut self, register: General) {
        let high = register.0 >> 3;
        self.code.extend([0x48 | (high << 2) | high, 0x31, 0xC0 | ((register.0 & 7) << 3) | (register.0 & 7)]);
    }

    pub(super) fn add_immediate(&mut self, register: General, value: i8) {
        self.code.extend([0x48 | (register.0 >> 3), 0x83, 0xC0 | (register.0 & 7), value as u8]);
    }

    /// Jumps back to `target` if `a < b`, unsigned.
    pub(super) fn repeat_while_below(&mut self, a: General, b: General, target: usize) {
        self.code.extend([0x48 | ((b.0 >> 3) << 2) | (a.0 >> 3), 0x39, 0xC0 | ((b.0 & 7) << 3) | (a.0 & 7)]);
        self.code.extend([0x0F, 0x82]);
        let distance = target as i64 - (self.code.len() as i64 + 4);
        self.code.extend((distance as i32).to_le_bytes());
    }

    pub(super) fn return_(&mut self) {
        self.code.push(0xC3);
    }

    /// A REX prefix where a short form needs one to reach r8 to r15.
    fn short_prefix(&mut self, register: General) {
        if register.0 >= 8 {
            self.code.push(0x41);
        }
    }

    /// REX.W with the upper bits of all registers.
    fn wide_prefix(&mut self, register: General, memory: Memory) {
        let (index, base) = upper_bits(Operand::Memory(memory));
        self.code.push(0x48 | ((register.0 >> 3) << 2) | (index << 1) | base);
    }

    /// A 256-bit instruction with the three-byte VEX prefix and the operand-size bit (packed double).
    #[expect(clippy::too_many_arguments, reason = "the fields of an encoding, in the order of the manual")]
    fn vector(&mut self, map: Map, w: bool, opcode: u8, reg: u8, vvvv: u8, operand: Operand, immediate: Option<u8>) {
        let (index, base) = upper_bits(operand);
        let inverted = ((!(reg >> 3) & 1) << 7) | ((!index & 1) << 6) | ((!base & 1) << 5);
        const LENGTH_256: u8 = 1 << 2;
        const PREFIX_66: u8 = 1;
        self.code.extend([
            0xC4,
            inverted | map as u8,
            (u8::from(w) << 7) | ((!vvvv & 15) << 3) | LENGTH_256 | PREFIX_66,
            opcode,
        ]);
        match operand {
            Operand::Register(register) => self.code.push(0xC0 | ((reg & 7) << 3) | (register.0 & 7)),
            Operand::Memory(memory) => self.address(reg, memory, usize::from(immediate.is_some())),
        }
        self.code.extend(immediate);
    }

    /// ModRM, SIB and displacement; `after` bytes of the instruction follow.
    fn address(&mut self, reg: u8, memory: Memory, after: usize) {
        let reg = (reg & 7) << 3;
        const SIB_FOLLOWS: u8 = 4;
        const NO_INDEX: u8 = 4 << 3;
        match memory {
            Memory::Pool(constant) => {
                // Relative to the next instruction.
                self.code.push(reg | 5);
                let place = self.code.len();
                self.pool_references.push((place, place + 4 + after, constant));
                self.code.extend([0; 4]);
            }
            Memory::At { base, index, displacement } => {
                let short = i8::try_from(displacement);
                let mode = if short.is_ok() { 0x40 } else { 0x80 };
                match index {
                    // rsp and r12 as a base can only be written with a SIB byte.
                    None if base.0 & 7 != SIB_FOLLOWS => self.code.push(mode | reg | (base.0 & 7)),
                    None => self.code.extend([mode | reg | SIB_FOLLOWS, NO_INDEX | (base.0 & 7)]),
                    Some(index) => {
                        self.code.extend([mode | reg | SIB_FOLLOWS, ((index.0 & 7) << 3) | (base.0 & 7)]);
                    }
                }
                match short {
                    Ok(short) => self.code.push(short as u8),
                    Err(_) => self.code.extend(displacement.to_le_bytes()),
                }
            }
        }
    }
}

/// Upper bits of the index and of the base (or only) register.
fn upper_bits(operand: Operand) -> (u8, u8) {
    match operand {
        Operand::Register(register) => (0, register.0 >> 3),
        Operand::Memory(Memory::At { base, index, .. }) => (index.map_or(0, |index| index.0 >> 3), base.0 >> 3),
        Operand::Memory(Memory::Pool(_)) => (0, 0),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn bytes(write: impl FnOnce(&mut Assembler)) -> String {
        let mut assembler = Assembler::default();
        write(&mut assembler);
        assembler.code.iter().map(|byte| format!("{byte:02x}")).collect::<Vec<_>>().join(" ")
    }

    fn at(base: General, index: Option<General>, displacement: i32) -> Operand {
        Operand::Memory(Memory::At { base, index, displacement })
    }

    fn row(base: General, displacement: i32) -> Operand {
        at(base, Some(General::R10), displacement)
    }

    const fn y(number: u8) -> Vector {
        Vector(number)
    }

    fn reg(number: u8) -> Operand {
        Operand::Register(Vector(number))
    }

    /// Expected bytes: GNU as 2.40 (binutils), Intel syntax, with the prefix form `{vex3}`; the text in each line is its input.
    #[test]
    #[rustfmt::skip]
    fn bytes_are_those_of_the_gnu_assembler() {
        type G = General;
        use {Comparison as C, FusedForm::*, Packed as P};
        type Case = (&'static str, &'static str, fn(&mut Assembler));
        let cases: &[Case] = &[
            ("vaddpd ymm1,ymm2,ymm3", "c4 e1 6d 58 cb", |a| a.packed(P::Add, y(1), y(2), reg(3))),
            ("vsubpd ymm9,ymm2,ymm11", "c4 41 6d 5c cb", |a| a.packed(P::Subtract, y(9), y(2), reg(11))),
            ("vmulpd ymm4,ymm12,[rax+r10+64]", "c4 a1 1d 59 64 10 40", |a| a.packed(P::Multiply, y(4), y(12), row(G::RAX, 64))),
            ("vdivpd ymm4,ymm5,[r13+r10+16]", "c4 81 55 5e 64 15 10", |a| a.packed(P::Divide, y(4), y(5), row(G::R13, 16))),
            ("vminpd ymm0,ymm15,[rdx+r10+4096]", "c4 a1 05 5d 84 12 00 10 00 00", |a| a.packed(P::Minimum, y(0), y(15), row(G::RDX, 4096))),
            ("vmaxpd ymm15,ymm0,[rdi+32]", "c4 61 7d 5f 7f 20", |a| a.packed(P::Maximum, y(15), y(0), at(G::RDI, None, 32))),
            ("vandpd ymm6,ymm7,ymm8", "c4 c1 45 54 f0", |a| a.packed(P::And, y(6), y(7), reg(8))),
            ("vorpd ymm8,ymm7,ymm6", "c4 61 45 56 c6", |a| a.packed(P::Or, y(8), y(7), reg(6))),
            ("vxorpd ymm13,ymm14,ymm15", "c4 41 0d 57 ef", |a| a.packed(P::ExclusiveOr, y(13), y(14), reg(15))),
            ("vsqrtpd ymm10,ymm3", "c4 61 7d 51 d3", |a| a.square_root(y(10), reg(3))),
            ("vsqrtpd ymm3,[r12+32]", "c4 c1 7d 51 5c 24 20", |a| a.square_root(y(3), at(G::R12, None, 32))),
            ("vcmplt_oqpd ymm1,ymm2,ymm3", "c4 e1 6d c2 cb 11", |a| a.compare(C::Less, y(1), y(2), reg(3))),
            ("vcmple_oqpd ymm9,ymm10,[rdi+160]", "c4 61 2d c2 8f a0 00 00 00 12", |a| a.compare(C::LessEqual, y(9), y(10), at(G::RDI, None, 160))),
            ("vcmpgt_oqpd ymm1,ymm12,ymm3", "c4 e1 1d c2 cb 1e", |a| a.compare(C::Greater, y(1), y(12), reg(3))),
            ("vcmpneq_uqpd ymm1,ymm2,ymm13", "c4 c1 6d c2 cd 04", |a| a.compare(C::NotEqual, y(1), y(2), reg(13))),
            ("vcmpunordpd ymm8,ymm8,ymm8", "c4 41 3d c2 c0 03", |a| a.compare(C::Unordered, y(8), y(8), reg(8))),
            ("vblendvpd ymm1,ymm2,ymm3,ymm12", "c4 e3 6d 4b cb c0", |a| a.blend(y(1), y(2), reg(3), y(12))),
            ("vblendvpd ymm11,ymm2,[r15+r10+8],ymm4", "c4 03 6d 4b 5c 17 08 40", |a| a.blend(y(11), y(2), row(G::R15, 8), y(4))),
            ("vfmadd132pd ymm1,ymm2,ymm3", "c4 e2 ed 98 cb", |a| a.fused(Fused::MultiplyAdd, Form132, y(1), y(2), reg(3))),
            ("vfmadd213pd ymm9,ymm10,[rbp+r10+16]", "c4 22 ad a8 4c 15 10", |a| a.fused(Fused::MultiplyAdd, Form213, y(9), y(10), row(G::RBP, 16))),
            ("vfmadd231pd ymm1,ymm12,ymm13", "c4 c2 9d b8 cd", |a| a.fused(Fused::MultiplyAdd, Form231, y(1), y(12), reg(13))),
            ("vfmsub132pd ymm1,ymm2,ymm13", "c4 c2 ed 9a cd", |a| a.fused(Fused::MultiplySubtract, Form132, y(1), y(2), reg(13))),
            ("vfmsub213pd ymm11,ymm2,ymm3", "c4 62 ed aa db", |a| a.fused(Fused::MultiplySubtract, Form213, y(11), y(2), reg(3))),
            ("vfmsub231pd ymm1,ymm2,[rdi+128]", "c4 e2 ed ba 8f 80 00 00 00", |a| a.fused(Fused::MultiplySubtract, Form231, y(1), y(2), at(G::RDI, None, 128))),
            ("vfnmadd132pd ymm1,ymm12,ymm3", "c4 e2 9d 9c cb", |a| a.fused(Fused::NegateMultiplyAdd, Form132, y(1), y(12), reg(3))),
            ("vfnmadd213pd ymm1,ymm2,[rdi+127]", "c4 e2 ed ac 4f 7f", |a| a.fused(Fused::NegateMultiplyAdd, Form213, y(1), y(2), at(G::RDI, None, 127))),
            ("vfnmadd231pd ymm8,ymm9,ymm10", "c4 42 b5 bc c2", |a| a.fused(Fused::NegateMultiplyAdd, Form231, y(8), y(9), reg(10))),
            ("vmovupd ymm5,[rbx+r10+16]", "c4 a1 7d 10 6c 13 10", |a| a.load(y(5), row(G::RBX, 16))),
            ("{load} vmovupd ymm12,ymm13", "c4 41 7d 10 e5", |a| a.load(y(12), reg(13))),
            ("vmovupd [rax+r10+16],ymm14", "c4 21 7d 11 74 10 10", |a| a.store(Memory::At { base: G::RAX, index: Some(G::R10), displacement: 16 }, y(14))),
            ("vmovupd [r8+32],ymm1", "c4 c1 7d 11 48 20", |a| a.store(Memory::At { base: G::R8, index: None, displacement: 32 }, y(1))),
            ("vzeroupper", "c5 f8 77", |a| a.clear_upper_halves()),
            ("mov rax,[rsi+8]", "48 8b 46 08", |a| a.load_pointer(G::RAX, Memory::At { base: G::RSI, index: None, displacement: 8 })),
            ("mov r12,[rsi+2048]", "4c 8b a6 00 08 00 00", |a| a.load_pointer(G::R12, Memory::At { base: G::RSI, index: None, displacement: 2048 })),
            ("push rbx; push r15", "53 41 57", |a| { a.push(G::RBX); a.push(G::R15) }),
            ("pop rbp; pop r12", "5d 41 5c", |a| { a.pop(G::RBP); a.pop(G::R12) }),
            ("xor r10,r10; xor rax,rax", "4d 31 d2 48 31 c0", |a| { a.clear(G::R10); a.clear(G::RAX) }),
            ("add r10,32; add rcx,64", "49 83 c2 20 48 83 c1 40", |a| { a.add_immediate(G::R10, 32); a.add_immediate(G::RCX, 64) }),
            ("again: cmp r10,r9; jb {disp32} again; ret", "4d 39 ca 0f 82 f7 ff ff ff c3", |a| { a.repeat_while_below(G::R10, G::R9, 0); a.return_() }),
        ];
        for (text, expected, write) in cases {
            assert_eq!(bytes(*write), *expected, "{text}");
        }
    }

    /// `vandpd ymm1,ymm2,[rip+24]` and `vcmppd ymm1,ymm2,[rip+47],4`, GNU as 2.40: the distance counts from the end of the
    /// instruction, an immediate included.
    #[test]
    fn constants_are_found_behind_the_code() {
        let mut assembler = Assembler::default();
        let one = assembler.constant(1.0f64.to_bits());
        assembler.packed(Packed::And, y(1), y(2), Operand::Memory(one));
        let first = assembler.position();
        let two = assembler.constant(2.0f64.to_bits());
        assert_eq!(assembler.constant(1.0f64.to_bits()), one);
        assembler.compare(Comparison::NotEqual, y(1), y(2), Operand::Memory(two));
        let end = assembler.position();
        let code = assembler.finish();
        assert_eq!(code.len(), 3 * VECTOR);
        assert_eq!(code[..5], [0xc4, 0xe1, 0x6d, 0x54, 0x0d]);
        assert_eq!(code[first..first + 5], [0xc4, 0xe1, 0x6d, 0xc2, 0x0d]);
        let distance = |at: usize| i32::from_le_bytes(code[at..at + 4].try_into().unwrap()) as usize;
        assert_eq!(code[first + distance(5)..][..8], 1.0f64.to_le_bytes());
        assert_eq!(code[end + distance(first + 5)..][..8], 2.0f64.to_le_bytes());
        assert_eq!(code[end - 1], 4);
    }
}
