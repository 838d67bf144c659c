#include "go_asm.h"
#include "textflag.h"

// Four ones, then four zeros: read 8·m before the zeros it lets m samples through.
DATA ·lanes+0(SB)/8, $-1
DATA ·lanes+8(SB)/8, $-1
DATA ·lanes+16(SB)/8, $-1
DATA ·lanes+24(SB)/8, $-1
DATA ·lanes+32(SB)/8, $0
DATA ·lanes+40(SB)/8, $0
DATA ·lanes+48(SB)/8, $0
DATA ·lanes+56(SB)/8, $0
GLOBL ·lanes(SB), RODATA|NOPTR, $64

// func levelsAVX2(b *Bins, peak, rms, square, x, y *float64)
// Every bin takes as many vectors as the longest needs, masked where it has no samples: how many is then no surprise.
TEXT ·levelsAVX2(SB), NOSPLIT, $0-48
	MOVQ b+0(FP), AX
	MOVQ Bins_at(AX), DI
	MOVQ (Bins_at+8)(AX), CX
	SHRQ $1, CX                  // bins
	MOVL Bins_most(AX), DX
	ADDQ $3, DX
	SHRQ $2, DX                  // vectors of the longest
	MOVQ x+32(FP), SI
	MOVQ y+40(FP), BX
	MOVQ peak+8(FP), R8
	MOVQ rms+16(FP), R9
	MOVQ square+24(FP), R10
	LEAQ ·lanes(SB), R11
	VPCMPEQD Y7, Y7, Y7
	VPSRLQ $1, Y7, Y7            // all but the sign
	MOVQ $4, R15

bin:
	MOVLQSX (DI), AX
	MOVLQSX 4(DI), R12
	SUBQ AX, R12                 // samples
	VCVTSI2SDQ R12, X6, X6
	VMOVDDUP X6, X6
	VXORPD Y0, Y0, Y0            // largest magnitude
	VXORPD Y1, Y1, Y1            // sum of x²
	VXORPD Y2, Y2, Y2            // sum of y²
	MOVQ DX, R13

vector:
	XORQ R14, R14                  // of the samples left, 0 to 4 in this vector
	TESTQ R12, R12
	CMOVQGT R12, R14
	CMPQ R14, R15
	CMOVQGT R15, R14
	NEGQ R14
	VMOVUPD 32(R11)(R14*8), Y3
	VMASKMOVPD (SI)(AX*8), Y3, Y4
	VMASKMOVPD (BX)(AX*8), Y3, Y5
	VMULPD Y4, Y4, Y3
	VANDPD Y7, Y4, Y4
	VMULPD Y5, Y5, Y5
	VMAXPD Y4, Y0, Y0
	VADDPD Y3, Y1, Y1
	VADDPD Y5, Y2, Y2
	ADDQ $4, AX
	SUBQ $4, R12
	DECQ R13
	JNZ vector

	VHADDPD Y1, Y2, Y3           // pairs of lanes: y, x, y, x
	VEXTRACTF128 $1, Y3, X4
	VADDPD X4, X3, X3
	VDIVPD X6, X3, X3
	VMOVSD X3, (R10)
	VUNPCKHPD X3, X3, X3
	VSQRTSD X3, X3, X3
	VMOVSD X3, (R9)
	VEXTRACTF128 $1, Y0, X4
	VMAXPD X4, X0, X0
	VUNPCKHPD X0, X0, X4
	VMAXSD X4, X0, X0
	VMOVSD X0, (R8)
	ADDQ $8, DI
	ADDQ $8, R8
	ADDQ $8, R9
	ADDQ $8, R10
	DECQ CX
	JNZ bin
	VZEROUPPER
	RET
