#include "go_asm.h"
#include "textflag.h"

// Four counts at X(SI). Y15 holds the four before as values, and then these.
// Sums: Y0 f, Y1 f², Y2 d², Y3 d⁴, Y4 second differences squared. Y5 the base.
#define FOUR(X) \
	VCVTDQ2PD (X)(SI), Y8            \ // a
	VPERM2F128 $0x21, Y8, Y15, Y9    \ // c, two back
	VSHUFPD $5, Y8, Y9, Y10          \ // b, one back
	VMOVAPD Y8, Y15                  \
	VSUBPD Y5, Y8, Y11               \ // f = a - base
	VSUBPD Y10, Y8, Y8               \ // d = a - b
	VSUBPD Y9, Y10, Y9               \ // b - c
	VSUBPD Y9, Y8, Y9                \ // dd
	VADDPD Y11, Y0, Y0               \
	VMULPD Y11, Y11, Y11             \
	VMULPD Y8, Y8, Y8                \
	VMULPD Y9, Y9, Y9                \
	VADDPD Y11, Y1, Y1               \
	VADDPD Y8, Y2, Y2                \
	VMULPD Y8, Y8, Y8                \
	VADDPD Y9, Y4, Y4                \
	VADDPD Y8, Y3, Y3

// func momentsAVX2(m *Moments, x *int32, n int)
// x points at the first of n counts, n a multiple of eight, with four more before it.
TEXT ·momentsAVX2(SB), NOSPLIT, $0-24
	MOVQ m+0(FP), DI
	MOVQ x+8(FP), SI
	MOVQ n+16(FP), CX
	VMOVUPD Moments_sum(DI), Y0
	VMOVUPD Moments_square(DI), Y1
	VMOVUPD Moments_two(DI), Y2
	VMOVUPD Moments_four(DI), Y3
	VMOVUPD Moments_bent(DI), Y4
	VBROADCASTSD Moments_base(DI), Y5
	VMOVDQU Moments_least(DI), Y6
	VMOVDQU Moments_most(DI), Y7
	MOVQ Moments_run(DI), R8
	MOVQ Moments_longest(DI), R9
	LEAQ ·runs(SB), BX
	VCVTDQ2PD -16(SI), Y15

eight:
	VMOVDQU (SI), Y12
	VPMINSD Y12, Y6, Y6
	VPMAXSD Y12, Y7, Y7
	VPCMPEQD -4(SI), Y12, Y12    // which are like the one before
	VMOVMSKPS Y12, AX
	FOUR(0)
	FOUR(16)
	MOVBLZX 0(BX)(AX*4), R10     // so many go on with the run
	MOVBLZX 1(BX)(AX*4), R11     // a run inside
	MOVBLZX 2(BX)(AX*4), R12     // the run at the end
	ADDQ R8, R10
	CMPQ R10, R9
	CMOVQGT R10, R9
	CMPQ R11, R9
	CMOVQGT R11, R9
	XORQ R13, R13
	CMPL AX, $255
	CMOVQNE R13, R8
	ADDQ R12, R8
	ADDQ $32, SI
	SUBQ $8, CX
	JNZ eight

	VMOVUPD Y0, Moments_sum(DI)
	VMOVUPD Y1, Moments_square(DI)
	VMOVUPD Y2, Moments_two(DI)
	VMOVUPD Y3, Moments_four(DI)
	VMOVUPD Y4, Moments_bent(DI)
	VMOVDQU Y6, Moments_least(DI)
	VMOVDQU Y7, Moments_most(DI)
	MOVQ R8, Moments_run(DI)
	MOVQ R9, Moments_longest(DI)
	VZEROUPPER
	RET
