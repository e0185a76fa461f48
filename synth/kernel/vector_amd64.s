//go:build amd64 && !purego

#include "textflag.h"

// Eight copies of each constant of exp2Neg and cosines (kernel.go) and of join3.
DATA end<>+0(SB)/8, $0x42f0000042f00000
DATA end<>+8(SB)/8, $0x42f0000042f00000
DATA end<>+16(SB)/8, $0x42f0000042f00000
DATA end<>+24(SB)/8, $0x42f0000042f00000
GLOBL end<>(SB), RODATA|NOPTR, $32
DATA round<>+0(SB)/8, $0x4b4000004b400000
DATA round<>+8(SB)/8, $0x4b4000004b400000
DATA round<>+16(SB)/8, $0x4b4000004b400000
DATA round<>+24(SB)/8, $0x4b4000004b400000
GLOBL round<>(SB), RODATA|NOPTR, $32
DATA c1<>+0(SB)/8, $0xbf317218bf317218
DATA c1<>+8(SB)/8, $0xbf317218bf317218
DATA c1<>+16(SB)/8, $0xbf317218bf317218
DATA c1<>+24(SB)/8, $0xbf317218bf317218
GLOBL c1<>(SB), RODATA|NOPTR, $32
DATA c2<>+0(SB)/8, $0x3e75fd263e75fd26
DATA c2<>+8(SB)/8, $0x3e75fd263e75fd26
DATA c2<>+16(SB)/8, $0x3e75fd263e75fd26
DATA c2<>+24(SB)/8, $0x3e75fd263e75fd26
GLOBL c2<>(SB), RODATA|NOPTR, $32
DATA c3<>+0(SB)/8, $0xbd6357f6bd6357f6
DATA c3<>+8(SB)/8, $0xbd6357f6bd6357f6
DATA c3<>+16(SB)/8, $0xbd6357f6bd6357f6
DATA c3<>+24(SB)/8, $0xbd6357f6bd6357f6
GLOBL c3<>(SB), RODATA|NOPTR, $32
DATA c4<>+0(SB)/8, $0x3c1e5fb03c1e5fb0
DATA c4<>+8(SB)/8, $0x3c1e5fb03c1e5fb0
DATA c4<>+16(SB)/8, $0x3c1e5fb03c1e5fb0
DATA c4<>+24(SB)/8, $0x3c1e5fb03c1e5fb0
GLOBL c4<>(SB), RODATA|NOPTR, $32
DATA c5<>+0(SB)/8, $0xbaaf649dbaaf649d
DATA c5<>+8(SB)/8, $0xbaaf649dbaaf649d
DATA c5<>+16(SB)/8, $0xbaaf649dbaaf649d
DATA c5<>+24(SB)/8, $0xbaaf649dbaaf649d
GLOBL c5<>(SB), RODATA|NOPTR, $32
DATA one<>+0(SB)/8, $0x3f8000003f800000
DATA one<>+8(SB)/8, $0x3f8000003f800000
DATA one<>+16(SB)/8, $0x3f8000003f800000
DATA one<>+24(SB)/8, $0x3f8000003f800000
GLOBL one<>(SB), RODATA|NOPTR, $32
DATA sin60<>+0(SB)/8, $0x3f5db3d73f5db3d7
DATA sin60<>+8(SB)/8, $0x3f5db3d73f5db3d7
DATA sin60<>+16(SB)/8, $0x3f5db3d73f5db3d7
DATA sin60<>+24(SB)/8, $0x3f5db3d73f5db3d7
GLOBL sin60<>(SB), RODATA|NOPTR, $32
DATA rootHalf<>+0(SB)/8, $0x3f3504f33f3504f3
DATA rootHalf<>+8(SB)/8, $0x3f3504f33f3504f3
DATA rootHalf<>+16(SB)/8, $0x3f3504f33f3504f3
DATA rootHalf<>+24(SB)/8, $0x3f3504f33f3504f3
GLOBL rootHalf<>(SB), RODATA|NOPTR, $32

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


// func carryAVX2(dst *float32, u *[8][]float32, coef *[8]float32, n int, start *[16]float32, re, im float32, mask uint32)
// What is in dst counts if the mask is not 0.
TEXT ·carryAVX2(SB), NOSPLIT, $0-52
	MOVQ coef+16(FP), DI
	VBROADCASTSS 0(DI), Y8
	VBROADCASTSS 4(DI), Y9
	VBROADCASTSS 8(DI), Y10
	VBROADCASTSS 12(DI), Y11
	VBROADCASTSS 16(DI), Y12
	VBROADCASTSS 20(DI), Y13
	VBROADCASTSS 24(DI), Y14
	VBROADCASTSS 28(DI), Y15
	MOVQ start+32(FP), DI
	VMOVUPS      (DI), Y4   // q
	VMOVUPS      32(DI), Y5
	VBROADCASTSS re+40(FP), Y6
	VBROADCASTSS im+44(FP), Y7
	MOVQ u+8(FP), DI
	MOVQ 0(DI), AX
	MOVQ 24(DI), BX
	MOVQ 48(DI), DX
	MOVQ 72(DI), SI
	MOVQ 96(DI), R8
	MOVQ 120(DI), R9
	MOVQ 144(DI), R10
	MOVQ 168(DI), R11
	MOVQ dst+0(FP), DI
	XORQ CX, CX         // offset of the real parts [bytes]
	MOVQ n+24(FP), R12
	SHLQ $2, R12        // of the imaginary parts

carry:
	VMULPS (AX)(CX*1), Y8, Y0
	VMULPS (BX)(CX*1), Y9, Y2
	VADDPS Y2, Y0, Y0
	VMULPS (DX)(CX*1), Y10, Y3
	VADDPS Y3, Y0, Y0
	VMULPS (SI)(CX*1), Y11, Y2
	VADDPS Y2, Y0, Y0
	VMULPS (R8)(CX*1), Y12, Y3
	VADDPS Y3, Y0, Y0
	VMULPS (R9)(CX*1), Y13, Y2
	VADDPS Y2, Y0, Y0
	VMULPS (R10)(CX*1), Y14, Y3
	VADDPS Y3, Y0, Y0
	VMULPS (R11)(CX*1), Y15, Y2
	VADDPS Y2, Y0, Y0
	VMULPS (AX)(R12*1), Y8, Y1
	VMULPS (BX)(R12*1), Y9, Y2
	VADDPS Y2, Y1, Y1
	VMULPS (DX)(R12*1), Y10, Y3
	VADDPS Y3, Y1, Y1
	VMULPS (SI)(R12*1), Y11, Y2
	VADDPS Y2, Y1, Y1
	VMULPS (R8)(R12*1), Y12, Y3
	VADDPS Y3, Y1, Y1
	VMULPS (R9)(R12*1), Y13, Y2
	VADDPS Y2, Y1, Y1
	VMULPS (R10)(R12*1), Y14, Y3
	VADDPS Y3, Y1, Y1
	VMULPS (R11)(R12*1), Y15, Y2
	VADDPS Y2, Y1, Y1
	VMULPS Y4, Y0, Y2
	VMULPS Y5, Y1, Y3
	VSUBPS Y3, Y2, Y2
	VMULPS Y5, Y0, Y3
	VMULPS Y4, Y1, Y0
	VADDPS Y0, Y3, Y3
	VMULPS Y6, Y4, Y0
	VMULPS Y7, Y5, Y1
	VSUBPS Y1, Y0, Y0
	VMULPS Y7, Y4, Y4
	VMULPS Y6, Y5, Y5
	VADDPS Y5, Y4, Y5
	VMOVAPS Y0, Y4
	CMPL mask+48(FP), $0
	JEQ  store
	VADDPS (DI)(CX*1), Y2, Y2
	VADDPS (DI)(R12*1), Y3, Y3

store:
	VMOVUPS Y2, (DI)(CX*1)
	VMOVUPS Y3, (DI)(R12*1)
	ADDQ $32, CX
	ADDQ $32, R12
	MOVQ n+24(FP), R13
	SHLQ $2, R13
	CMPQ CX, R13
	JLT  carry
	VZEROUPPER
	RET

// func transposeAVX2(dst, src *float32, n int)
// Blocks of eight rows and eight elements.
TEXT ·transposeAVX2(SB), NOSPLIT, $0-24
	MOVQ dst+0(FP), DI
	MOVQ src+8(FP), SI
	MOVQ n+16(FP), CX
	LEAQ (CX*4), R8     // bytes in a row
	LEAQ (R8)(R8*2), R9
	MOVQ $2, R12

half:
	MOVQ SI, R10
	MOVQ DI, R11
	MOVQ CX, BX

square:
	LEAQ        (R10)(R8*4), R13
	VMOVUPS     (R10), Y0
	VMOVUPS     (R10)(R8*1), Y1
	VMOVUPS     (R10)(R8*2), Y2
	VMOVUPS     (R10)(R9*1), Y3
	VMOVUPS     (R13), Y4
	VMOVUPS     (R13)(R8*1), Y5
	VMOVUPS     (R13)(R8*2), Y6
	VMOVUPS     (R13)(R9*1), Y7
	VUNPCKLPS   Y1, Y0, Y8
	VUNPCKHPS   Y1, Y0, Y9
	VUNPCKLPS   Y3, Y2, Y10
	VUNPCKHPS   Y3, Y2, Y11
	VUNPCKLPS   Y5, Y4, Y12
	VUNPCKHPS   Y5, Y4, Y13
	VUNPCKLPS   Y7, Y6, Y14
	VUNPCKHPS   Y7, Y6, Y15
	VSHUFPS     $0x44, Y10, Y8, Y0
	VSHUFPS     $0xee, Y10, Y8, Y1
	VSHUFPS     $0x44, Y11, Y9, Y2
	VSHUFPS     $0xee, Y11, Y9, Y3
	VSHUFPS     $0x44, Y14, Y12, Y4
	VSHUFPS     $0xee, Y14, Y12, Y5
	VSHUFPS     $0x44, Y15, Y13, Y6
	VSHUFPS     $0xee, Y15, Y13, Y7
	VPERM2F128  $0x20, Y4, Y0, Y8
	VPERM2F128  $0x20, Y5, Y1, Y9
	VPERM2F128  $0x20, Y6, Y2, Y10
	VPERM2F128  $0x20, Y7, Y3, Y11
	VPERM2F128  $0x31, Y4, Y0, Y12
	VPERM2F128  $0x31, Y5, Y1, Y13
	VPERM2F128  $0x31, Y6, Y2, Y14
	VPERM2F128  $0x31, Y7, Y3, Y15
	VMOVUPS     Y8, (R11)
	VMOVUPS     Y9, 64(R11)
	VMOVUPS     Y10, 128(R11)
	VMOVUPS     Y11, 192(R11)
	VMOVUPS     Y12, 256(R11)
	VMOVUPS     Y13, 320(R11)
	VMOVUPS     Y14, 384(R11)
	VMOVUPS     Y15, 448(R11)
	ADDQ        $32, R10
	ADDQ        $512, R11
	SUBQ        $8, BX
	JNZ         square
	LEAQ        (SI)(R8*8), SI
	ADDQ        $32, DI
	DECQ        R12
	JNZ         half
	VZEROUPPER
	RET

// func assembleAVX2(x, re, im, turn *float32, at *int32, bins int, mask uint32)
// What is at the places counts through the mask.
TEXT ·assembleAVX2(SB), NOSPLIT, $0-52
	MOVQ x+0(FP), DI
	MOVQ re+8(FP), SI
	MOVQ im+16(FP), R8
	MOVQ turn+24(FP), DX
	MOVQ at+32(FP), R9
	MOVQ bins+40(FP), CX
	VBROADCASTSS mask+48(FP), Y13

bin:
	VBROADCASTSS (DX), Y14
	VBROADCASTSS 4(DX), Y15
	MOVLQSX      (R9), R10
	MOVLQSX      4(R9), R11
	SHLQ         $6, R10
	SHLQ         $6, R11
	VMOVUPS      (SI), Y0
	VMOVUPS      (R8), Y1
	VMULPS       Y14, Y0, Y2
	VMULPS       Y15, Y1, Y3
	VSUBPS       Y3, Y2, Y2   // real part of the first eight
	VMULPS       Y15, Y0, Y4
	VMULPS       Y14, Y1, Y5
	VADDPS       Y5, Y4, Y3   // imaginary part
	VMOVUPS      32(SI), Y0
	VMOVUPS      32(R8), Y1
	VMULPS       Y14, Y0, Y4
	VMULPS       Y15, Y1, Y5
	VSUBPS       Y5, Y4, Y4   // of the last eight
	VMULPS       Y15, Y0, Y6
	VMULPS       Y14, Y1, Y7
	VADDPS       Y7, Y6, Y5
	VSUBPS       Y5, Y2, Y6
	VANDPS       (DI)(R10*1), Y13, Y8
	VADDPS       Y8, Y6, Y6
	VMOVUPS      Y6, (DI)(R10*1)
	VADDPS       Y4, Y3, Y7
	VANDPS       32(DI)(R10*1), Y13, Y9
	VADDPS       Y9, Y7, Y7
	VMOVUPS      Y7, 32(DI)(R10*1)
	VADDPS       Y5, Y2, Y6
	VANDPS       (DI)(R11*1), Y13, Y10
	VADDPS       Y10, Y6, Y6
	VMOVUPS      Y6, (DI)(R11*1)
	VSUBPS       Y3, Y4, Y7
	VANDPS       32(DI)(R11*1), Y13, Y11
	VADDPS       Y11, Y7, Y7
	VMOVUPS      Y7, 32(DI)(R11*1)
	ADDQ         $64, SI
	ADDQ         $64, R8
	ADDQ         $8, DX
	ADDQ         $8, R9
	DECQ         CX
	JNZ          bin
	VZEROUPPER
	RET

// RE, IM = the point at X times the turn at off(DX).
#define TIMES(X0, X1, off, RE, IM) \
	VBROADCASTSS off(DX), Y12; \
	VBROADCASTSS off+4(DX), Y13; \
	VMOVUPS      X0, Y14; \
	VMOVUPS      X1, Y15; \
	VMULPS       Y12, Y14, RE; \
	VMULPS       Y13, Y15, IM; \
	VSUBPS       IM, RE, RE; \
	VMULPS       Y13, Y14, IM; \
	VMULPS       Y12, Y15, Y15; \
	VADDPS       Y15, IM, IM

// func join2AVX2(x, turn *float32, inner, blocks int)
TEXT ·join2AVX2(SB), NOSPLIT, $0-32
	MOVQ x+0(FP), DI
	MOVQ inner+16(FP), R8
	MOVQ blocks+24(FP), CX
	MOVQ R8, BX
	SHLQ $6, R8

block2:
	MOVQ turn+8(FP), DX
	MOVQ BX, R11

point2:
	TIMES((DI)(R8*1), 32(DI)(R8*1), 0, Y2, Y3)
	VMOVUPS (DI), Y0
	VMOVUPS 32(DI), Y1
	VADDPS  Y2, Y0, Y4
	VADDPS  Y3, Y1, Y5
	VSUBPS  Y2, Y0, Y6
	VSUBPS  Y3, Y1, Y7
	VMOVUPS Y4, (DI)
	VMOVUPS Y5, 32(DI)
	VMOVUPS Y6, (DI)(R8*1)
	VMOVUPS Y7, 32(DI)(R8*1)
	ADDQ    $64, DI
	ADDQ    $8, DX
	DECQ    R11
	JNZ     point2
	ADDQ    R8, DI
	DECQ    CX
	JNZ     block2
	VZEROUPPER
	RET

// func join3AVX2(x *float32, blocks int)
TEXT ·join3AVX2(SB), NOSPLIT, $0-16
	MOVQ    x+0(FP), DI
	MOVQ    blocks+8(FP), CX
	VMOVUPS sin60<>(SB), Y15
	VMOVUPS half<>(SB), Y14

block3:
	VMOVUPS (DI), Y0
	VMOVUPS 32(DI), Y1
	VMOVUPS 64(DI), Y2
	VMOVUPS 96(DI), Y3
	VMOVUPS 128(DI), Y4
	VMOVUPS 160(DI), Y5
	VADDPS  Y4, Y2, Y6    // sum
	VADDPS  Y5, Y3, Y7
	VSUBPS  Y4, Y2, Y8
	VSUBPS  Y5, Y3, Y9
	VMULPS  Y15, Y8, Y8   // d
	VMULPS  Y15, Y9, Y9
	VMULPS  Y14, Y6, Y10
	VMULPS  Y14, Y7, Y11
	VSUBPS  Y10, Y0, Y10  // m
	VSUBPS  Y11, Y1, Y11
	VADDPS  Y6, Y0, Y0
	VADDPS  Y7, Y1, Y1
	VSUBPS  Y9, Y10, Y2
	VADDPS  Y8, Y11, Y3
	VADDPS  Y9, Y10, Y4
	VSUBPS  Y8, Y11, Y5
	VMOVUPS Y0, (DI)
	VMOVUPS Y1, 32(DI)
	VMOVUPS Y2, 64(DI)
	VMOVUPS Y3, 96(DI)
	VMOVUPS Y4, 128(DI)
	VMOVUPS Y5, 160(DI)
	ADDQ    $192, DI
	DECQ    CX
	JNZ     block3
	VZEROUPPER
	RET

// FOUR leaves the transform of the points at p, q, r, s in Y0 to Y7.
#define FOUR(p, q, r, s) \
	VMOVUPS p(DI), Y8      \
	VMOVUPS p+32(DI), Y9   \
	VMOVUPS r(DI), Y10     \
	VMOVUPS r+32(DI), Y11  \
	VADDPS  Y10, Y8, Y12   \
	VADDPS  Y11, Y9, Y13   \
	VSUBPS  Y10, Y8, Y14   \
	VSUBPS  Y11, Y9, Y15   \
	VMOVUPS q(DI), Y8      \
	VMOVUPS q+32(DI), Y9   \
	VMOVUPS s(DI), Y10     \
	VMOVUPS s+32(DI), Y11  \
	VADDPS  Y10, Y8, Y6    \
	VADDPS  Y11, Y9, Y7    \
	VSUBPS  Y10, Y8, Y8    \
	VSUBPS  Y11, Y9, Y9    \
	VADDPS  Y6, Y12, Y0    \
	VADDPS  Y7, Y13, Y1    \
	VSUBPS  Y6, Y12, Y4    \
	VSUBPS  Y7, Y13, Y5    \
	VSUBPS  Y9, Y14, Y2    \
	VADDPS  Y8, Y15, Y3    \
	VADDPS  Y9, Y14, Y6    \
	VSUBPS  Y8, Y15, Y7

// func join8AVX2(x *float32, blocks int)
// Transforms of the even points wait in their places while those of the odd ones stay
// in Y0 to Y7.
TEXT ·join8AVX2(SB), NOSPLIT, $0-16
	MOVQ    x+0(FP), DI
	MOVQ    blocks+8(FP), CX

block8:
	FOUR(0, 128, 256, 384)
	VMOVUPS Y0, 0(DI)
	VMOVUPS Y1, 32(DI)
	VMOVUPS Y2, 128(DI)
	VMOVUPS Y3, 160(DI)
	VMOVUPS Y4, 256(DI)
	VMOVUPS Y5, 288(DI)
	VMOVUPS Y6, 384(DI)
	VMOVUPS Y7, 416(DI)
	FOUR(64, 192, 320, 448)
	VMOVUPS rootHalf<>(SB), Y15

	// Even ones that will be overwritten.
	VMOVUPS 128(DI), Y8
	VMOVUPS 160(DI), Y9
	VMOVUPS 256(DI), Y10
	VMOVUPS 288(DI), Y11

	VMOVUPS 0(DI), Y12
	VMOVUPS 32(DI), Y13
	VADDPS  Y0, Y12, Y14
	VSUBPS  Y0, Y12, Y12
	VMOVUPS Y14, 0(DI)
	VMOVUPS Y12, 256(DI)
	VADDPS  Y1, Y13, Y14
	VSUBPS  Y1, Y13, Y13
	VMOVUPS Y14, 32(DI)
	VMOVUPS Y13, 288(DI)

	VSUBPS  Y3, Y2, Y0
	VADDPS  Y3, Y2, Y1
	VMULPS  Y15, Y0, Y0
	VMULPS  Y15, Y1, Y1
	VADDPS  Y0, Y8, Y12
	VADDPS  Y1, Y9, Y13
	VSUBPS  Y0, Y8, Y8
	VSUBPS  Y1, Y9, Y9
	VMOVUPS Y12, 64(DI)
	VMOVUPS Y13, 96(DI)
	VMOVUPS Y8, 320(DI)
	VMOVUPS Y9, 352(DI)

	VMOVUPS 384(DI), Y8
	VMOVUPS 416(DI), Y9
	VSUBPS  Y5, Y10, Y12
	VADDPS  Y4, Y11, Y13
	VADDPS  Y5, Y10, Y10
	VSUBPS  Y4, Y11, Y11
	VMOVUPS Y12, 128(DI)
	VMOVUPS Y13, 160(DI)
	VMOVUPS Y10, 384(DI)
	VMOVUPS Y11, 416(DI)

	VADDPS  Y7, Y6, Y0
	VSUBPS  Y7, Y6, Y1
	VMULPS  Y15, Y0, Y0
	VMULPS  Y15, Y1, Y1
	VSUBPS  Y0, Y8, Y12
	VADDPS  Y1, Y9, Y13
	VADDPS  Y0, Y8, Y8
	VSUBPS  Y1, Y9, Y9
	VMOVUPS Y12, 192(DI)
	VMOVUPS Y13, 224(DI)
	VMOVUPS Y8, 448(DI)
	VMOVUPS Y9, 480(DI)

	ADDQ    $512, DI
	DECQ    CX
	JNZ     block8
	VZEROUPPER
	RET

// func join4AVX2(x, turn *float32, inner, blocks int)
TEXT ·join4AVX2(SB), NOSPLIT, $0-32
	MOVQ x+0(FP), DI
	MOVQ inner+16(FP), R8
	MOVQ blocks+24(FP), CX
	MOVQ R8, BX
	SHLQ $6, R8
	LEAQ (R8)(R8*2), R9

block4:
	MOVQ turn+8(FP), DX
	MOVQ BX, R11

point4:
	TIMES((DI)(R8*2), 32(DI)(R8*2), 8, Y4, Y5)
	VMOVUPS (DI), Y0
	VMOVUPS 32(DI), Y1
	VADDPS  Y4, Y0, Y2   // sum
	VADDPS  Y5, Y1, Y3
	VSUBPS  Y4, Y0, Y0   // dif
	VSUBPS  Y5, Y1, Y1
	TIMES((DI)(R8*1), 32(DI)(R8*1), 0, Y4, Y5)
	TIMES((DI)(R9*1), 32(DI)(R9*1), 16, Y6, Y7)
	VADDPS  Y6, Y4, Y8   // odd
	VADDPS  Y7, Y5, Y9
	VSUBPS  Y6, Y4, Y10  // of
	VSUBPS  Y7, Y5, Y11
	VADDPS  Y8, Y2, Y4
	VADDPS  Y9, Y3, Y5
	VSUBPS  Y8, Y2, Y6
	VSUBPS  Y9, Y3, Y7
	VMOVUPS Y4, (DI)
	VMOVUPS Y5, 32(DI)
	VMOVUPS Y6, (DI)(R8*2)
	VMOVUPS Y7, 32(DI)(R8*2)
	VSUBPS  Y11, Y0, Y4
	VADDPS  Y10, Y1, Y5
	VADDPS  Y11, Y0, Y6
	VSUBPS  Y10, Y1, Y7
	VMOVUPS Y4, (DI)(R8*1)
	VMOVUPS Y5, 32(DI)(R8*1)
	VMOVUPS Y6, (DI)(R9*1)
	VMOVUPS Y7, 32(DI)(R9*1)
	ADDQ    $64, DI
	ADDQ    $24, DX
	DECQ    R11
	JNZ     point4
	ADDQ    R9, DI
	DECQ    CX
	JNZ     block4
	VZEROUPPER
	RET

// func profileAVX2(acc, v *float32, points int, amp, d, inv *[Lanes]float32)
// First the first samples of all rays, then the second ones.
TEXT ·profileAVX2(SB), NOSPLIT, $0-48
	MOVQ    amp+24(FP), R8
	MOVQ    d+32(FP), R9
	MOVQ    inv+40(FP), R10
	MOVQ    v+8(FP), BX
	MOVQ    $2, DX
	VMOVUPS end<>(SB), Y5
	VMOVUPS round<>(SB), Y6
	VMOVUPS c1<>(SB), Y7
	VMOVUPS c2<>(SB), Y8
	VMOVUPS c3<>(SB), Y9
	VMOVUPS c4<>(SB), Y10
	VMOVUPS c5<>(SB), Y11
	VMOVUPS one<>(SB), Y12

samples:
	MOVQ    acc+0(FP), DI
	MOVQ    points+16(FP), CX
	MOVQ    BX, SI
	VMOVUPS (R8), Y13
	VMOVUPS (R9), Y14
	VMOVUPS (R10), Y15

profile:
	VSUBPS  (SI), Y14, Y0
	VMULPS  Y15, Y0, Y0
	VMULPS  Y0, Y0, Y0
	VMINPS  Y5, Y0, Y0     // s
	VSUBPS  Y0, Y6, Y1
	VPSLLD  $23, Y1, Y2    // n as an exponent
	VSUBPS  Y6, Y1, Y1
	VADDPS  Y1, Y0, Y0     // r
	VMULPS  Y0, Y0, Y1
	VMULPS  Y11, Y0, Y3
	VADDPS  Y10, Y3, Y3
	VMULPS  Y9, Y0, Y4
	VADDPS  Y8, Y4, Y4
	VMULPS  Y1, Y3, Y3
	VADDPS  Y4, Y3, Y3
	VMULPS  Y7, Y0, Y4
	VADDPS  Y12, Y4, Y4
	VMULPS  Y1, Y3, Y3
	VADDPS  Y4, Y3, Y3
	VPADDD  Y2, Y3, Y3
	VMULPS  Y13, Y3, Y3
	VADDPS  (DI), Y3, Y3
	VMOVUPS Y3, (DI)
	ADDQ    $64, SI
	ADDQ    $32, DI
	DECQ    CX
	JNZ     profile
	ADDQ    $32, R8
	ADDQ    $32, R9
	ADDQ    $32, R10
	ADDQ    $32, BX
	DECQ    DX
	JNZ     samples
	VZEROUPPER
	RET

// func cosinesAVX2(acc, v *float32, points int, coef *float32, m int, d *[Lanes]float32, inv float32)
TEXT ·cosinesAVX2(SB), NOSPLIT, $0-52

// Q = 2 cos(2 pi (d - v) inv) - 2 of the eight v at off(SI).
#define DELTA(off, Q) \
	VMOVUPS      off(R9), Q; \
	VSUBPS       off(SI), Q, Q; \
	VBROADCASTSS inv+48(FP), Y15; \
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
#define STEP(C, Q, E, B) \
	VADDPS C, E, E; \
	VMULPS Q, B, Y15; \
	VADDPS Y15, E, E; \
	VADDPS E, B, B

// The last step, and the sum to the eight acc at off(DI).
#define LAST(off, C, Q, E, B) \
	VADDPS  C, E, E; \
	VMULPS  half<>(SB), Q, Q; \
	VMULPS  Q, B, B; \
	VADDPS  B, E, E; \
	VADDPS  off(DI), E, E; \
	VMOVUPS E, off(DI)

	MOVQ acc+0(FP), DI
	MOVQ v+8(FP), SI
	MOVQ points+16(FP), CX
	MOVQ coef+24(FP), DX
	MOVQ m+32(FP), BX
	MOVQ d+40(FP), R9
	SHLQ $6, BX
	ADDQ DX, BX // the last term

cos32: // two points at a time, while there are two
	CMPQ CX, $2
	JLT  cos16
	DELTA(0, Y0)
	DELTA(32, Y1)
	ADDQ $64, SI
	DELTA(0, Y2)
	DELTA(32, Y3)
	VXORPS Y4, Y4, Y4
	VXORPS Y5, Y5, Y5
	VXORPS Y6, Y6, Y6
	VXORPS Y7, Y7, Y7
	VXORPS Y8, Y8, Y8
	VXORPS Y9, Y9, Y9
	VXORPS Y10, Y10, Y10
	VXORPS Y11, Y11, Y11
	MOVQ BX, R8
	CMPQ R8, DX
	JEQ  last32

step32:
	VMOVUPS (R8), Y13
	VMOVUPS 32(R8), Y14
	STEP(Y13, Y0, Y4, Y8)
	STEP(Y14, Y1, Y5, Y9)
	STEP(Y13, Y2, Y6, Y10)
	STEP(Y14, Y3, Y7, Y11)
	SUBQ $64, R8
	CMPQ R8, DX
	JNE  step32

last32:
	VMOVUPS (DX), Y13
	VMOVUPS 32(DX), Y14
	LAST(0, Y13, Y0, Y4, Y8)
	LAST(0, Y14, Y1, Y5, Y9)
	LAST(32, Y13, Y2, Y6, Y10)
	LAST(32, Y14, Y3, Y7, Y11)
	ADDQ $64, SI
	ADDQ $64, DI
	SUBQ $2, CX
	JMP  cos32

cos16:
	CMPQ CX, $1
	JLT  cosined
	DELTA(0, Y0)
	DELTA(32, Y1)
	VXORPS Y4, Y4, Y4
	VXORPS Y5, Y5, Y5
	VXORPS Y8, Y8, Y8
	VXORPS Y9, Y9, Y9
	MOVQ BX, R8
	CMPQ R8, DX
	JEQ  last16

step16:
	VMOVUPS (R8), Y13
	VMOVUPS 32(R8), Y14
	STEP(Y13, Y0, Y4, Y8)
	STEP(Y14, Y1, Y5, Y9)
	SUBQ $64, R8
	CMPQ R8, DX
	JNE  step16

last16:
	VMOVUPS (DX), Y13
	VMOVUPS 32(DX), Y14
	LAST(0, Y13, Y0, Y4, Y8)
	LAST(0, Y14, Y1, Y5, Y9)

cosined:
	VZEROUPPER
	RET
