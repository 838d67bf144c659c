#include "go_asm.h"
#include "textflag.h"

// One more sample at each of four positions. The four samples lie at X bytes beyond R8, R9, R10, R11 in the one signal
// and SI bytes further in the other; T(BX) holds the Gaussian and the sample's number.
// Y0 power of r, Y1 r; sums Y2 h, Y3 h·j, Y4 h·j²; Y5 h·u, Y6 h·j·u; Y7 h·v, Y8 h·j·v.
#define SAMPLE(T, X) \
	VBROADCASTSD (T)(BX), Y9         \
	VBROADCASTSD (T+8)(BX), Y10      \
	VMULPD Y0, Y9, Y9                \
	VMULPD Y1, Y0, Y0                \
	VMULPD Y10, Y9, Y11              \
	VMULPD Y10, Y11, Y10             \
	VADDPD Y9, Y2, Y2                \
	VADDPD Y11, Y3, Y3               \
	VADDPD Y10, Y4, Y4               \
	VMOVSD (X)(R8), X12              \
	VMOVSD (X)(R10), X13             \
	VMOVHPD (X)(R9), X12, X12        \
	VMOVHPD (X)(R11), X13, X13       \
	VINSERTF128 $1, X13, Y12, Y12    \
	VMOVSD (X)(R8)(SI*1), X14        \
	VMOVSD (X)(R10)(SI*1), X15       \
	VMOVHPD (X)(R9)(SI*1), X14, X14  \
	VMOVHPD (X)(R11)(SI*1), X15, X15 \
	VINSERTF128 $1, X15, Y14, Y14    \
	VMULPD Y12, Y9, Y13              \
	VMULPD Y12, Y11, Y12             \
	VMULPD Y14, Y9, Y15              \
	VMULPD Y14, Y11, Y14             \
	VADDPD Y13, Y5, Y5               \
	VADDPD Y12, Y6, Y6               \
	VADDPD Y15, Y7, Y7               \
	VADDPD Y14, Y8, Y8

// Height of one signal: (s2·a - s1·(b + d·a)) / det, with d Y0, s1 Y9, s2 Y10, det Y11; A becomes the height.
#define HEIGHT(A, B) \
	VMULPD A, Y0, Y12    \
	VADDPD Y12, B, B     \
	VMULPD B, Y9, B      \
	VMULPD A, Y10, A     \
	VSUBPD B, A, A       \
	VDIVPD Y11, A, A

// The register of a sample's address: its number is the lane's plus shift.
#define ADDRESS(R) \
	MOVLQSX R, R       \
	ADDQ DX, R         \
	LEAQ (AX)(R*8), R

// func linesAVX2(l *LineFit, dst0, dst1, pos *float64, n int, x0, x1 *float64, shift int)
// Four positions at a time as LineFit.plain takes one; n is four or more, and the last four may overlap those before.
TEXT ·linesAVX2(SB), NOSPLIT, $32-64
	MOVQ l+0(FP), DI
	MOVQ x0+40(FP), AX
	MOVQ x1+48(FP), SI
	SUBQ AX, SI
	MOVQ shift+56(FP), DX
	XORQ CX, CX

four:
	MOVQ pos+24(FP), BX
	VMOVUPD (BX)(CX*8), Y2
	MOVQ $0x3FE0000000000000, R8 // 0.5
	VMOVQ R8, X0
	VBROADCASTSD X0, Y0
	VADDPD Y0, Y2, Y3
	VROUNDPD $1, Y3, Y3          // towards minus infinity: the nearest sample
	VSUBPD Y2, Y3, Y0            // d
	VMOVUPD Y0, 0(SP)
	VCVTTPD2DQY Y3, X3
	VMOVD X3, R8
	VPEXTRD $1, X3, R9
	VPEXTRD $2, X3, R10
	VPEXTRD $3, X3, R11
	ADDRESS(R8)
	ADDRESS(R9)
	ADDRESS(R10)
	ADDRESS(R11)

	// r = exp(-c·d): z = (-0.25·c)·d, then e = 1 + (z·f)·e along the series, then the fourth power
	MOVQ $0xBFD0000000000000, BX // -0.25
	VMOVQ BX, X2
	VMULSD LineFit_c(DI), X2, X2
	VBROADCASTSD X2, Y2
	VMULPD Y0, Y2, Y2
	MOVQ $0x3FF0000000000000, BX // 1
	VMOVQ BX, X3
	VBROADCASTSD X3, Y3
	VMOVAPD Y3, Y1
	LEAQ ·expSeries(SB), BX
	MOVQ $9, R12

series:
	VBROADCASTSD (BX), Y4
	VMULPD Y4, Y2, Y4
	VMULPD Y1, Y4, Y4
	VADDPD Y4, Y3, Y1
	ADDQ $8, BX
	DECQ R12
	JNZ series
	VMULPD Y1, Y1, Y1
	VMULPD Y1, Y1, Y1

	VMOVAPD Y3, Y0
	VXORPD Y2, Y2, Y2
	VXORPD Y3, Y3, Y3
	VXORPD Y4, Y4, Y4
	VXORPD Y5, Y5, Y5
	VXORPD Y6, Y6, Y6
	VXORPD Y7, Y7, Y7
	VXORPD Y8, Y8, Y8
	MOVQ LineFit_table(DI), BX
	MOVQ LineFit_reach(DI), R12  // two samples each, and one

two:
	SAMPLE(0, 0)
	SAMPLE(16, 8)
	ADDQ $32, BX
	ADDQ $16, R8
	ADDQ $16, R9
	ADDQ $16, R10
	ADDQ $16, R11
	DECQ R12
	JNZ two
	SAMPLE(0, 0)

	VMOVUPD 0(SP), Y0            // d
	VMULPD Y2, Y0, Y12           // d·m0
	VADDPD Y12, Y3, Y9           // s1 = m1 + d·m0
	VADDPD Y3, Y3, Y10
	VADDPD Y12, Y10, Y10
	VMULPD Y10, Y0, Y10
	VADDPD Y10, Y4, Y10          // s2 = m2 + d·(m1 + m1 + d·m0)
	VMULPD Y10, Y2, Y11
	VMULPD Y9, Y9, Y12
	VSUBPD Y12, Y11, Y11         // det = m0·s2 - s1·s1
	HEIGHT(Y5, Y6)
	HEIGHT(Y7, Y8)
	MOVQ dst0+8(FP), BX
	VMOVUPD Y5, (BX)(CX*8)
	MOVQ dst1+16(FP), BX
	VMOVUPD Y7, (BX)(CX*8)

	ADDQ $4, CX
	MOVQ n+32(FP), BX
	SUBQ CX, BX
	JLE done
	CMPQ BX, $4
	JGE four
	LEAQ -4(CX)(BX*1), CX        // the last four once more in part
	JMP four

done:
	VZEROUPPER
	RET
