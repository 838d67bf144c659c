#include "go_asm.h"
#include "textflag.h"

// The sums after one more sample at each of four positions, u in U and v in V; G(BX) holds the Gaussian.
// Y0 power of r, Y1 r; Y2 sum of h, Y3 of Y2, Y4 of Y3; Y5 h·u, Y6 of Y5; Y7 h·v, Y8 of Y7.
#define SUMS(G, U, V) \
	VBROADCASTSD (G)(BX), Y9         \
	VMULPD Y0, Y9, Y9                \
	VMULPD Y1, Y0, Y0                \
	VADDPD Y9, Y2, Y2                \
	VMULPD U, Y9, U                  \
	VMULPD V, Y9, V                  \
	VADDPD Y2, Y3, Y3                \
	VADDPD U, Y5, Y5                 \
	VADDPD V, Y7, Y7                 \
	VADDPD Y3, Y4, Y4                \
	VADDPD Y5, Y6, Y6                \
	VADDPD Y7, Y8, Y8

// Two samples each: those of the one signal lie at R8, R9, R10, R11, those of the other SI bytes further.
#define TWO \
	VMOVUPD (R8), X10                       \
	VMOVUPD (R9), X11                       \
	VINSERTF128 $1, (R10), Y10, Y10         \
	VINSERTF128 $1, (R11), Y11, Y11         \
	VMOVUPD (R8)(SI*1), X12                 \
	VMOVUPD (R9)(SI*1), X13                 \
	VINSERTF128 $1, (R10)(SI*1), Y12, Y12   \
	VINSERTF128 $1, (R11)(SI*1), Y13, Y13   \
	VUNPCKLPD Y11, Y10, Y14                 \
	VUNPCKLPD Y13, Y12, Y15                 \
	VUNPCKHPD Y11, Y10, Y10                 \
	VUNPCKHPD Y13, Y12, Y12                 \
	SUMS(0, Y14, Y15)                       \
	SUMS(8, Y10, Y12)

// The last sample each.
#define ONE \
	VMOVSD (R8), X10                 \
	VMOVSD (R10), X11                \
	VMOVHPD (R9), X10, X10           \
	VMOVHPD (R11), X11, X11          \
	VINSERTF128 $1, X11, Y10, Y10    \
	VMOVSD (R8)(SI*1), X12           \
	VMOVSD (R10)(SI*1), X13          \
	VMOVHPD (R9)(SI*1), X12, X12     \
	VMOVHPD (R11)(SI*1), X13, X13    \
	VINSERTF128 $1, X13, Y12, Y12    \
	SUMS(0, Y10, Y12)

// Height of one signal: (s2·a - s1·(q·a - b)) / det, with q Y0, s1 Y9, s2 Y10, det Y11; A becomes the height.
#define HEIGHT(A, B) \
	VMULPD A, Y0, Y12    \
	VSUBPD B, Y12, B     \
	VMULPD B, Y9, B      \
	VMULPD A, Y10, A     \
	VSUBPD B, A, A       \
	VDIVPD Y11, A, A

// The register of a sample's address: its number is the lane's plus shift.
#define ADDRESS(R) \
	MOVLQSX R, R       \
	ADDQ DX, R         \
	LEAQ (AX)(R*8), R

// Begins four positions at BX: their first samples' addresses to R8, R9, R10, R11 (AX is the first sample of all, DX the
// shift), d = nearest - position to the stack, r = exp(-c·d) to Y1 and 1 to Y0. exp is the fourth power of e = 1 + (z·f)·e
// along the series, z = (-0.25·c)·d.
#define BEGIN \
	VMOVUPD (BX)(CX*8), Y2 \
	MOVQ $0x3FE0000000000000, R8 \
	VMOVQ R8, X0 \
	VBROADCASTSD X0, Y0 \
	VADDPD Y0, Y2, Y3 \
	VROUNDPD $1, Y3, Y3 \
	VSUBPD Y2, Y3, Y0 \
	VMOVUPD Y0, 0(SP) \
	VCVTTPD2DQY Y3, X3 \
	VMOVD X3, R8 \
	VPEXTRD $1, X3, R9 \
	VPEXTRD $2, X3, R10 \
	VPEXTRD $3, X3, R11 \
	ADDRESS(R8) \
	ADDRESS(R9) \
	ADDRESS(R10) \
	ADDRESS(R11) \
	MOVQ $0xBFD0000000000000, BX \
	VMOVQ BX, X2 \
	VMULSD LineFit_c(DI), X2, X2 \
	VBROADCASTSD X2, Y2 \
	VMULPD Y0, Y2, Y2 \
	MOVQ $0x3FF0000000000000, BX \
	VMOVQ BX, X3 \
	VBROADCASTSD X3, Y3 \
	VMOVAPD Y3, Y1 \
	LEAQ ·expSeries(SB), BX \
	MOVQ $9, R12 \
series: \
	VBROADCASTSD (BX), Y4 \
	VMULPD Y4, Y2, Y4 \
	VMULPD Y1, Y4, Y4 \
	VADDPD Y4, Y3, Y1 \
	ADDQ $8, BX \
	DECQ R12 \
	JNZ series \
	VMULPD Y1, Y1, Y1 \
	VMULPD Y1, Y1, Y1 \
	VMOVAPD Y3, Y0

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
	BEGIN
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
	TWO
	ADDQ $16, BX
	ADDQ $16, R8
	ADDQ $16, R9
	ADDQ $16, R10
	ADDQ $16, R11
	DECQ R12
	JNZ two
	ONE

	MOVQ LineFit_reach(DI), BX
	INCQ BX
	VCVTSI2SDQ BX, X9, X9
	VBROADCASTSD X9, Y9
	VADDPD 0(SP), Y9, Y0         // q = reach + 1 + d
	VMULPD Y2, Y0, Y12           // q·m0
	VSUBPD Y3, Y12, Y9           // s1 = q·m0 - m1
	VADDPD Y3, Y3, Y10
	VSUBPD Y10, Y12, Y10
	VMULPD Y10, Y0, Y10
	VADDPD Y4, Y4, Y11
	VSUBPD Y3, Y11, Y11
	VADDPD Y11, Y10, Y10         // s2 = q·(q·m0 - 2·m1) + (2·m2 - m1)
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

// The sums after one more sample at each of four positions, u in U; G(BX) holds the Gaussian.
// Y0 power of r, Y1 r; Y2 sum of h, and Y3, Y4, Y5, Y6 each of the one before; Y7 h·u, and Y8, Y9 likewise.
#define DEEP(G, U) \
	VBROADCASTSD (G)(BX), Y10        \
	VMULPD Y0, Y10, Y10              \
	VMULPD Y1, Y0, Y0                \
	VADDPD Y10, Y2, Y2               \
	VMULPD U, Y10, U                 \
	VADDPD Y2, Y3, Y3                \
	VADDPD U, Y7, Y7                 \
	VADDPD Y3, Y4, Y4                \
	VADDPD Y7, Y8, Y8                \
	VADDPD Y4, Y5, Y5                \
	VADDPD Y8, Y9, Y9                \
	VADDPD Y5, Y6, Y6

// func sumsAVX2(l *LineFit, out *[8][4]float64, pos *float64, n int, x *float64, shift int)
// Four positions at a time as LineFit.sums takes one; n is four or more, and the last four may overlap those before.
TEXT ·sumsAVX2(SB), NOSPLIT, $32-48
	MOVQ l+0(FP), DI
	MOVQ out+8(FP), SI
	MOVQ x+32(FP), AX
	MOVQ shift+40(FP), DX
	XORQ CX, CX

four:
	MOVQ pos+16(FP), BX
	BEGIN
	VXORPD Y2, Y2, Y2
	VXORPD Y3, Y3, Y3
	VXORPD Y4, Y4, Y4
	VXORPD Y5, Y5, Y5
	VXORPD Y6, Y6, Y6
	VXORPD Y7, Y7, Y7
	VXORPD Y8, Y8, Y8
	VXORPD Y9, Y9, Y9
	MOVQ LineFit_table(DI), BX
	MOVQ LineFit_reach(DI), R12  // two samples each, and one

two:
	VMOVUPD (R8), X11
	VMOVUPD (R9), X12
	VINSERTF128 $1, (R10), Y11, Y11
	VINSERTF128 $1, (R11), Y12, Y12
	VUNPCKLPD Y12, Y11, Y13
	VUNPCKHPD Y12, Y11, Y11
	DEEP(0, Y13)
	DEEP(8, Y11)
	ADDQ $16, BX
	ADDQ $16, R8
	ADDQ $16, R9
	ADDQ $16, R10
	ADDQ $16, R11
	DECQ R12
	JNZ two
	VMOVSD (R8), X11
	VMOVSD (R10), X12
	VMOVHPD (R9), X11, X11
	VMOVHPD (R11), X12, X12
	VINSERTF128 $1, X12, Y11, Y11
	DEEP(0, Y11)

	VMOVUPD Y2, 0(SI)
	VMOVUPD Y3, 32(SI)
	VMOVUPD Y4, 64(SI)
	VMOVUPD Y5, 96(SI)
	VMOVUPD Y6, 128(SI)
	VMOVUPD Y7, 160(SI)
	VMOVUPD Y8, 192(SI)
	VMOVUPD Y9, 224(SI)
	ADDQ $256, SI

	ADDQ $4, CX
	MOVQ n+24(FP), BX
	SUBQ CX, BX
	JLE done
	CMPQ BX, $4
	JGE four
	LEAQ -4(CX)(BX*1), CX        // the last four once more in part
	JMP four

done:
	VZEROUPPER
	RET
