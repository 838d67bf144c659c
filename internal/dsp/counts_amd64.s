#include "textflag.h"

// func valuesAVX2(dst *float64, x *int32, n int, gain, offset float64)
// n is a multiple of eight, not zero.
TEXT ·valuesAVX2(SB), NOSPLIT, $0-40
	MOVQ dst+0(FP), DI
	MOVQ x+8(FP), SI
	MOVQ n+16(FP), CX
	VBROADCASTSD gain+24(FP), Y2
	VBROADCASTSD offset+32(FP), Y3

eight:
	VCVTDQ2PD 0(SI), Y0
	VCVTDQ2PD 16(SI), Y1
	VMULPD Y2, Y0, Y0
	VMULPD Y2, Y1, Y1
	VADDPD Y3, Y0, Y0
	VADDPD Y3, Y1, Y1
	VMOVUPD Y0, 0(DI)
	VMOVUPD Y1, 32(DI)
	ADDQ $32, SI
	ADDQ $64, DI
	SUBQ $8, CX
	JNZ eight
	VZEROUPPER
	RET

// func extremesAVX2(x *int32, n int) (least, most int32)
// n is a multiple of eight, not zero.
TEXT ·extremesAVX2(SB), NOSPLIT, $0-24
	MOVQ x+0(FP), SI
	MOVQ n+8(FP), CX
	VMOVDQU (SI), Y0
	VMOVDQU (SI), Y1

eight:
	VMOVDQU (SI), Y2
	VPMINSD Y2, Y0, Y0
	VPMAXSD Y2, Y1, Y1
	ADDQ $32, SI
	SUBQ $8, CX
	JNZ eight

	// eight lanes to four, to two, to one
	VEXTRACTI128 $1, Y0, X2
	VEXTRACTI128 $1, Y1, X3
	VPMINSD X2, X0, X0
	VPMAXSD X3, X1, X1
	VPSHUFD $0x4E, X0, X2
	VPSHUFD $0x4E, X1, X3
	VPMINSD X2, X0, X0
	VPMAXSD X3, X1, X1
	VPSHUFD $0xB1, X0, X2
	VPSHUFD $0xB1, X1, X3
	VPMINSD X2, X0, X0
	VPMAXSD X3, X1, X1
	VMOVD X0, AX
	VMOVD X1, BX
	MOVL AX, least+16(FP)
	MOVL BX, most+20(FP)
	VZEROUPPER
	RET
