//go:build amd64 && !purego

#include "textflag.h"

// Eight copies of each constant of expNeg (kernel.go), and two of integers.
DATA low<>+0(SB)/8, $0xc2ae0000c2ae0000
DATA low<>+8(SB)/8, $0xc2ae0000c2ae0000
DATA low<>+16(SB)/8, $0xc2ae0000c2ae0000
DATA low<>+24(SB)/8, $0xc2ae0000c2ae0000
GLOBL low<>(SB), RODATA|NOPTR, $32
DATA log2e<>+0(SB)/8, $0x3fb8aa3b3fb8aa3b
DATA log2e<>+8(SB)/8, $0x3fb8aa3b3fb8aa3b
DATA log2e<>+16(SB)/8, $0x3fb8aa3b3fb8aa3b
DATA log2e<>+24(SB)/8, $0x3fb8aa3b3fb8aa3b
GLOBL log2e<>(SB), RODATA|NOPTR, $32
DATA round<>+0(SB)/8, $0x4b4000004b400000
DATA round<>+8(SB)/8, $0x4b4000004b400000
DATA round<>+16(SB)/8, $0x4b4000004b400000
DATA round<>+24(SB)/8, $0x4b4000004b400000
GLOBL round<>(SB), RODATA|NOPTR, $32
DATA ln2h<>+0(SB)/8, $0x3f3180003f318000
DATA ln2h<>+8(SB)/8, $0x3f3180003f318000
DATA ln2h<>+16(SB)/8, $0x3f3180003f318000
DATA ln2h<>+24(SB)/8, $0x3f3180003f318000
GLOBL ln2h<>(SB), RODATA|NOPTR, $32
DATA ln2l<>+0(SB)/8, $0xb95e8083b95e8083
DATA ln2l<>+8(SB)/8, $0xb95e8083b95e8083
DATA ln2l<>+16(SB)/8, $0xb95e8083b95e8083
DATA ln2l<>+24(SB)/8, $0xb95e8083b95e8083
GLOBL ln2l<>(SB), RODATA|NOPTR, $32
DATA c2<>+0(SB)/8, $0x3f0000003f000000
DATA c2<>+8(SB)/8, $0x3f0000003f000000
DATA c2<>+16(SB)/8, $0x3f0000003f000000
DATA c2<>+24(SB)/8, $0x3f0000003f000000
GLOBL c2<>(SB), RODATA|NOPTR, $32
DATA c3<>+0(SB)/8, $0x3e2aaa023e2aaa02
DATA c3<>+8(SB)/8, $0x3e2aaa023e2aaa02
DATA c3<>+16(SB)/8, $0x3e2aaa023e2aaa02
DATA c3<>+24(SB)/8, $0x3e2aaa023e2aaa02
GLOBL c3<>(SB), RODATA|NOPTR, $32
DATA c4<>+0(SB)/8, $0x3d2aaa563d2aaa56
DATA c4<>+8(SB)/8, $0x3d2aaa563d2aaa56
DATA c4<>+16(SB)/8, $0x3d2aaa563d2aaa56
DATA c4<>+24(SB)/8, $0x3d2aaa563d2aaa56
GLOBL c4<>(SB), RODATA|NOPTR, $32
DATA c5<>+0(SB)/8, $0x3c0937dc3c0937dc
DATA c5<>+8(SB)/8, $0x3c0937dc3c0937dc
DATA c5<>+16(SB)/8, $0x3c0937dc3c0937dc
DATA c5<>+24(SB)/8, $0x3c0937dc3c0937dc
GLOBL c5<>(SB), RODATA|NOPTR, $32
DATA c6<>+0(SB)/8, $0x3ab6baa23ab6baa2
DATA c6<>+8(SB)/8, $0x3ab6baa23ab6baa2
DATA c6<>+16(SB)/8, $0x3ab6baa23ab6baa2
DATA c6<>+24(SB)/8, $0x3ab6baa23ab6baa2
GLOBL c6<>(SB), RODATA|NOPTR, $32
DATA one<>+0(SB)/8, $0x3f8000003f800000
DATA one<>+8(SB)/8, $0x3f8000003f800000
DATA one<>+16(SB)/8, $0x3f8000003f800000
DATA one<>+24(SB)/8, $0x3f8000003f800000
GLOBL one<>(SB), RODATA|NOPTR, $32
DATA sign<>+0(SB)/8, $0x8000000080000000
DATA sign<>+8(SB)/8, $0x8000000080000000
DATA sign<>+16(SB)/8, $0x8000000080000000
DATA sign<>+24(SB)/8, $0x8000000080000000
GLOBL sign<>(SB), RODATA|NOPTR, $32
DATA bias<>+0(SB)/8, $0x0000007f0000007f
DATA bias<>+8(SB)/8, $0x0000007f0000007f
DATA bias<>+16(SB)/8, $0x0000007f0000007f
DATA bias<>+24(SB)/8, $0x0000007f0000007f
GLOBL bias<>(SB), RODATA|NOPTR, $32

DATA cos1<>+0(SB)/8, $0xc21de9e6c21de9e6
DATA cos1<>+8(SB)/8, $0xc21de9e6c21de9e6
DATA cos1<>+16(SB)/8, $0xc21de9e6c21de9e6
DATA cos1<>+24(SB)/8, $0xc21de9e6c21de9e6
GLOBL cos1<>(SB), RODATA|NOPTR, $32
DATA cos2<>+0(SB)/8, $0x4301e0f84301e0f8
DATA cos2<>+8(SB)/8, $0x4301e0f84301e0f8
DATA cos2<>+16(SB)/8, $0x4301e0f84301e0f8
DATA cos2<>+24(SB)/8, $0x4301e0f84301e0f8
GLOBL cos2<>(SB), RODATA|NOPTR, $32
DATA cos3<>+0(SB)/8, $0xc32ae9e4c32ae9e4
DATA cos3<>+8(SB)/8, $0xc32ae9e4c32ae9e4
DATA cos3<>+16(SB)/8, $0xc32ae9e4c32ae9e4
DATA cos3<>+24(SB)/8, $0xc32ae9e4c32ae9e4
GLOBL cos3<>(SB), RODATA|NOPTR, $32
DATA cos4<>+0(SB)/8, $0x42f0fa8342f0fa83
DATA cos4<>+8(SB)/8, $0x42f0fa8342f0fa83
DATA cos4<>+16(SB)/8, $0x42f0fa8342f0fa83
DATA cos4<>+24(SB)/8, $0x42f0fa8342f0fa83
GLOBL cos4<>(SB), RODATA|NOPTR, $32
DATA cos5<>+0(SB)/8, $0xc25368f9c25368f9
DATA cos5<>+8(SB)/8, $0xc25368f9c25368f9
DATA cos5<>+16(SB)/8, $0xc25368f9c25368f9
DATA cos5<>+24(SB)/8, $0xc25368f9c25368f9
GLOBL cos5<>(SB), RODATA|NOPTR, $32
DATA cos6<>+0(SB)/8, $0x417ce9c5417ce9c5
DATA cos6<>+8(SB)/8, $0x417ce9c5417ce9c5
DATA cos6<>+16(SB)/8, $0x417ce9c5417ce9c5
DATA cos6<>+24(SB)/8, $0x417ce9c5417ce9c5
GLOBL cos6<>(SB), RODATA|NOPTR, $32
DATA cos7<>+0(SB)/8, $0xc05b7128c05b7128
DATA cos7<>+8(SB)/8, $0xc05b7128c05b7128
DATA cos7<>+16(SB)/8, $0xc05b7128c05b7128
DATA cos7<>+24(SB)/8, $0xc05b7128c05b7128
GLOBL cos7<>(SB), RODATA|NOPTR, $32
DATA cos8<>+0(SB)/8, $0x3f1063163f106316
DATA cos8<>+8(SB)/8, $0x3f1063163f106316
DATA cos8<>+16(SB)/8, $0x3f1063163f106316
DATA cos8<>+24(SB)/8, $0x3f1063163f106316
GLOBL cos8<>(SB), RODATA|NOPTR, $32
DATA half<>+0(SB)/8, $0x3f0000003f000000
DATA half<>+8(SB)/8, $0x3f0000003f000000
DATA half<>+16(SB)/8, $0x3f0000003f000000
DATA half<>+24(SB)/8, $0x3f0000003f000000
GLOBL half<>(SB), RODATA|NOPTR, $32

// func combineAVX2(dst *float32, n int, rows *[]float32, coef *float32, nrows int)
// n is a multiple of 8. One block of 64, 32 or 8 elements at a time stays in registers
// while the rows pass by; products and sums are rounded apart.
TEXT ·combineAVX2(SB), NOSPLIT, $0-40
	MOVQ dst+0(FP), DI
	MOVQ n+8(FP), CX
	MOVQ rows+16(FP), SI
	MOVQ coef+24(FP), DX
	MOVQ nrows+32(FP), BX
	XORQ R10, R10 // offset into dst and every row [bytes]

block64:
	CMPQ CX, $64
	JLT  block32
	VXORPS Y0, Y0, Y0
	VXORPS Y1, Y1, Y1
	VXORPS Y2, Y2, Y2
	VXORPS Y3, Y3, Y3
	VXORPS Y4, Y4, Y4
	VXORPS Y5, Y5, Y5
	VXORPS Y6, Y6, Y6
	VXORPS Y7, Y7, Y7
	MOVQ SI, R8
	MOVQ DX, R9
	MOVQ BX, R11

row64:
	MOVQ (R8), R12
	ADDQ R10, R12
	VBROADCASTSS (R9), Y15
	VMULPS 0(R12), Y15, Y8
	VADDPS Y8, Y0, Y0
	VMULPS 32(R12), Y15, Y9
	VADDPS Y9, Y1, Y1
	VMULPS 64(R12), Y15, Y10
	VADDPS Y10, Y2, Y2
	VMULPS 96(R12), Y15, Y11
	VADDPS Y11, Y3, Y3
	VMULPS 128(R12), Y15, Y12
	VADDPS Y12, Y4, Y4
	VMULPS 160(R12), Y15, Y13
	VADDPS Y13, Y5, Y5
	VMULPS 192(R12), Y15, Y14
	VADDPS Y14, Y6, Y6
	VMULPS 224(R12), Y15, Y8
	VADDPS Y8, Y7, Y7
	ADDQ $24, R8 // the next slice header
	ADDQ $4, R9
	DECQ R11
	JNZ  row64
	VMOVUPS Y0, 0(DI)(R10*1)
	VMOVUPS Y1, 32(DI)(R10*1)
	VMOVUPS Y2, 64(DI)(R10*1)
	VMOVUPS Y3, 96(DI)(R10*1)
	VMOVUPS Y4, 128(DI)(R10*1)
	VMOVUPS Y5, 160(DI)(R10*1)
	VMOVUPS Y6, 192(DI)(R10*1)
	VMOVUPS Y7, 224(DI)(R10*1)
	ADDQ $256, R10
	SUBQ $64, CX
	JMP  block64

block32:
	CMPQ CX, $32
	JLT  block8
	VXORPS Y0, Y0, Y0
	VXORPS Y1, Y1, Y1
	VXORPS Y2, Y2, Y2
	VXORPS Y3, Y3, Y3
	MOVQ SI, R8
	MOVQ DX, R9
	MOVQ BX, R11

row32:
	MOVQ (R8), R12
	ADDQ R10, R12
	VBROADCASTSS (R9), Y15
	VMULPS 0(R12), Y15, Y8
	VADDPS Y8, Y0, Y0
	VMULPS 32(R12), Y15, Y9
	VADDPS Y9, Y1, Y1
	VMULPS 64(R12), Y15, Y10
	VADDPS Y10, Y2, Y2
	VMULPS 96(R12), Y15, Y11
	VADDPS Y11, Y3, Y3
	ADDQ $24, R8 // the next slice header
	ADDQ $4, R9
	DECQ R11
	JNZ  row32
	VMOVUPS Y0, 0(DI)(R10*1)
	VMOVUPS Y1, 32(DI)(R10*1)
	VMOVUPS Y2, 64(DI)(R10*1)
	VMOVUPS Y3, 96(DI)(R10*1)
	ADDQ $128, R10
	SUBQ $32, CX
	JMP  block32

block8:
	CMPQ CX, $8
	JLT  combined
	VXORPS Y0, Y0, Y0
	MOVQ SI, R8
	MOVQ DX, R9
	MOVQ BX, R11

row8:
	MOVQ (R8), R12
	ADDQ R10, R12
	VBROADCASTSS (R9), Y15
	VMULPS 0(R12), Y15, Y8
	VADDPS Y8, Y0, Y0
	ADDQ $24, R8 // the next slice header
	ADDQ $4, R9
	DECQ R11
	JNZ  row8
	VMOVUPS Y0, 0(DI)(R10*1)
	ADDQ $32, R10
	SUBQ $8, CX
	JMP  block8

combined:
	VZEROUPPER
	RET

// func profileAVX2(acc, v *float32, n int, amp, d, invW float32)
// n is a multiple of 8.
TEXT ·profileAVX2(SB), NOSPLIT, $0-36
	MOVQ         acc+0(FP), DI
	MOVQ         v+8(FP), SI
	MOVQ         n+16(FP), CX
	VBROADCASTSS amp+24(FP), Y15
	VBROADCASTSS d+28(FP), Y14
	VBROADCASTSS invW+32(FP), Y13
	VMOVUPS      log2e<>(SB), Y12
	VMOVUPS      round<>(SB), Y11
	VMOVUPS      ln2h<>(SB), Y10
	VMOVUPS      ln2l<>(SB), Y9
	VMOVUPS      c6<>(SB), Y8
	VMOVUPS      one<>(SB), Y7

eight:
	VMOVUPS (SI), Y0
	VSUBPS  Y0, Y14, Y0        // d - v
	VMULPS  Y13, Y0, Y0
	VMULPS  Y0, Y0, Y0
	VXORPS  sign<>(SB), Y0, Y0 // x
	VMULPS  Y12, Y0, Y1
	VADDPS  Y11, Y1, Y1
	VPSUBD  Y11, Y1, Y2        // n as an integer
	VSUBPS  Y11, Y1, Y1        // n
	VMULPS  Y10, Y1, Y3
	VSUBPS  Y3, Y0, Y4
	VMULPS  Y9, Y1, Y3
	VSUBPS  Y3, Y4, Y4         // r
	VMULPS  Y8, Y4, Y5
	VADDPS  c5<>(SB), Y5, Y5
	VMULPS  Y4, Y5, Y5
	VADDPS  c4<>(SB), Y5, Y5
	VMULPS  Y4, Y5, Y5
	VADDPS  c3<>(SB), Y5, Y5
	VMULPS  Y4, Y5, Y5
	VADDPS  c2<>(SB), Y5, Y5
	VMULPS  Y4, Y5, Y5
	VADDPS  Y7, Y5, Y5
	VMULPS  Y4, Y5, Y5
	VADDPS  Y7, Y5, Y5
	VPADDD  bias<>(SB), Y2, Y2
	VPSLLD  $23, Y2, Y2
	VMULPS  Y2, Y5, Y5
	VCMPPS  $13, low<>(SB), Y0, Y6 // x >= low
	VANDPS  Y6, Y5, Y5
	VMULPS  Y15, Y5, Y5
	VADDPS  (DI), Y5, Y5
	VMOVUPS Y5, (DI)
	ADDQ    $32, SI
	ADDQ    $32, DI
	SUBQ    $8, CX
	JNZ     eight
	VZEROUPPER
	RET

// func cosinesAVX2(acc, v *float32, n int, coef *float32, m int, d, inv float32)
// n is a multiple of 8. 32 or 8 elements at a time.
TEXT ·cosinesAVX2(SB), NOSPLIT, $0-48

// Q = 2 cos(2 pi (d - v) inv) - 2 of the eight v at off(SI).
#define DELTA(off, Q) \
	VBROADCASTSS d+40(FP), Q; \
	VSUBPS       off(SI), Q, Q; \
	VBROADCASTSS inv+44(FP), Y15; \
	VMULPS       Y15, Q, Q; \
	VADDPS       round<>(SB), Q, Y15; \
	VMOVUPS      round<>(SB), Y14; \
	VSUBPS       Y14, Y15, Y15; \
	VSUBPS       Y15, Q, Q; \
	VMULPS       Q, Q, Q; \
	VMOVUPS      cos8<>(SB), Y15; \
	VMULPS       Q, Y15, Y15; \
	VADDPS       cos7<>(SB), Y15, Y15; \
	VMULPS       Q, Y15, Y15; \
	VADDPS       cos6<>(SB), Y15, Y15; \
	VMULPS       Q, Y15, Y15; \
	VADDPS       cos5<>(SB), Y15, Y15; \
	VMULPS       Q, Y15, Y15; \
	VADDPS       cos4<>(SB), Y15, Y15; \
	VMULPS       Q, Y15, Y15; \
	VADDPS       cos3<>(SB), Y15, Y15; \
	VMULPS       Q, Y15, Y15; \
	VADDPS       cos2<>(SB), Y15, Y15; \
	VMULPS       Q, Y15, Y15; \
	VADDPS       cos1<>(SB), Y15, Y15; \
	VMULPS       Y15, Q, Q

// One step of the sum.
#define STEP(Q, E, B) \
	VADDPS Y14, E, E; \
	VMULPS Q, B, Y15; \
	VADDPS Y15, E, E; \
	VADDPS E, B, B

// The last step, and the sum to the eight acc at off(DI).
#define LAST(off, Q, E, B) \
	VADDPS  Y14, E, E; \
	VMULPS  half<>(SB), Q, Q; \
	VMULPS  Q, B, B; \
	VADDPS  B, E, E; \
	VADDPS  off(DI), E, E; \
	VMOVUPS E, off(DI)

	MOVQ acc+0(FP), DI
	MOVQ v+8(FP), SI
	MOVQ n+16(FP), CX
	MOVQ coef+24(FP), DX
	MOVQ m+32(FP), BX

cos32:
	CMPQ CX, $32
	JLT  cos8
	DELTA(0, Y0)
	DELTA(32, Y1)
	DELTA(64, Y2)
	DELTA(96, Y3)
	VXORPS Y4, Y4, Y4
	VXORPS Y5, Y5, Y5
	VXORPS Y6, Y6, Y6
	VXORPS Y7, Y7, Y7
	VXORPS Y8, Y8, Y8
	VXORPS Y9, Y9, Y9
	VXORPS Y10, Y10, Y10
	VXORPS Y11, Y11, Y11
	MOVQ BX, R8
	TESTQ R8, R8
	JZ   last32

step32:
	VBROADCASTSS (DX)(R8*4), Y14
	STEP(Y0, Y4, Y8)
	STEP(Y1, Y5, Y9)
	STEP(Y2, Y6, Y10)
	STEP(Y3, Y7, Y11)
	DECQ R8
	JNZ  step32

last32:
	VBROADCASTSS (DX), Y14
	LAST(0, Y0, Y4, Y8)
	LAST(32, Y1, Y5, Y9)
	LAST(64, Y2, Y6, Y10)
	LAST(96, Y3, Y7, Y11)
	ADDQ $128, SI
	ADDQ $128, DI
	SUBQ $32, CX
	JMP  cos32

cos8:
	CMPQ CX, $8
	JLT  cosined
	DELTA(0, Y0)
	VXORPS Y4, Y4, Y4
	VXORPS Y8, Y8, Y8
	MOVQ BX, R8
	TESTQ R8, R8
	JZ   last8

step8:
	VBROADCASTSS (DX)(R8*4), Y14
	STEP(Y0, Y4, Y8)
	DECQ R8
	JNZ  step8

last8:
	VBROADCASTSS (DX), Y14
	LAST(0, Y0, Y4, Y8)
	ADDQ $32, SI
	ADDQ $32, DI
	SUBQ $8, CX
	JMP  cos8

cosined:
	VZEROUPPER
	RET
