#include "textflag.h"

// func rectifyAVX2(dst, src *float64, n, w int)
// dst[i] is the mean of |src[i]| to |src[i+w-1]|, each summed in that order; n is a multiple of four, not zero.
TEXT ·rectifyAVX2(SB), NOSPLIT, $0-32
	MOVQ dst+0(FP), DI
	MOVQ src+8(FP), SI
	MOVQ n+16(FP), CX
	MOVQ w+24(FP), DX
	VCVTSI2SDQ DX, X3, X3
	VBROADCASTSD X3, Y3
	VPCMPEQD Y2, Y2, Y2
	VPSRLQ $1, Y2, Y2            // all but the sign

four:
	VXORPD Y0, Y0, Y0
	XORQ AX, AX

sample:
	VANDPD (SI)(AX*8), Y2, Y1
	VADDPD Y1, Y0, Y0
	INCQ AX
	CMPQ AX, DX
	JLT sample
	VDIVPD Y3, Y0, Y0
	VMOVUPD Y0, (DI)
	ADDQ $32, SI
	ADDQ $32, DI
	SUBQ $4, CX
	JNZ four
	VZEROUPPER
	RET
