#include "go_asm.h"
#include "textflag.h"

// Operands stand in Go's order: the destination last, and VSUBPD b, a, d is d = a - b.

// One section: Y0 is x and becomes y; ZA, ZB are its states; K is where its B0, A1, A2 lie, in all lanes.
//   t = B0·x;  y = t + za;  za = zb - A1·y;  zb = -t - A2·y
// Y7 holds the sign bit in all lanes.
#define SECTION(K, ZA, ZB) \
	VMULPD (K+0)(DI), Y0, Y1  \
	VADDPD ZA, Y1, Y0         \
	VMULPD (K+32)(DI), Y0, Y2 \
	VSUBPD Y2, ZB, ZA         \
	VXORPD Y7, Y1, Y1         \
	VMULPD (K+64)(DI), Y0, Y2 \
	VSUBPD Y2, Y1, ZB

// One sample of all four channels, its values in row X of the stack, through both bands to rows F and G.
#define SAMPLE(X, F, G) \
	VMOVUPD (32*X)(SP), Y0                \
	SECTION(Bank_coef+0, Y8, Y9)          \
	SECTION(Bank_coef+96, Y10, Y11)       \
	VMOVUPD Y0, (32*F)(SP)                \
	VMOVUPD (32*X)(SP), Y0                \
	SECTION(Bank_coef+192, Y12, Y13)      \
	SECTION(Bank_coef+288, Y14, Y15)      \
	VMOVUPD Y0, (32*G)(SP)

// Four counts of channel C to four values.
#define VALUES(C, Y) \
	MOVQ (Bank_in+24*C)(DI), AX              \
	VCVTDQ2PD (AX)(SI*4), Y                  \
	VMULPD (Bank_gain+32*C)(DI), Y, Y        \
	VADDPD (Bank_offset+32*C)(DI), Y, Y

// Rows Y0..Y3 become columns: Y0..Y3, by way of Y4..Y7.
#define TRANSPOSE \
	VUNPCKLPD Y1, Y0, Y4            \
	VUNPCKHPD Y1, Y0, Y5            \
	VUNPCKLPD Y3, Y2, Y6            \
	VUNPCKHPD Y3, Y2, Y7            \
	VPERM2F128 $0x20, Y6, Y4, Y0    \
	VPERM2F128 $0x20, Y7, Y5, Y1    \
	VPERM2F128 $0x31, Y6, Y4, Y2    \
	VPERM2F128 $0x31, Y7, Y5, Y3

// Four samples of all channels from stack rows R to R+3 to the four slices at OUT.
#define GIVE(R, OUT) \
	VMOVUPD (32*R)(SP), Y0      \
	VMOVUPD (32*R+32)(SP), Y1   \
	VMOVUPD (32*R+64)(SP), Y2   \
	VMOVUPD (32*R+96)(SP), Y3   \
	TRANSPOSE                   \
	MOVQ (OUT+0)(DI), AX        \
	VMOVUPD Y0, (AX)(SI*8)      \
	MOVQ (OUT+24)(DI), AX       \
	VMOVUPD Y1, (AX)(SI*8)      \
	MOVQ (OUT+48)(DI), AX       \
	VMOVUPD Y2, (AX)(SI*8)      \
	MOVQ (OUT+72)(DI), AX       \
	VMOVUPD Y3, (AX)(SI*8)

// func bankAVX2(b *Bank, from, n int)
// Rows of the stack: 0-3 values, 4-7 band f, 8-11 band g; a row is one sample of four channels.
TEXT ·bankAVX2(SB), NOSPLIT, $384-24
	MOVQ b+0(FP), DI
	MOVQ from+8(FP), SI
	MOVQ n+16(FP), CX
	ADDQ SI, CX
	VMOVUPD (Bank_z+0)(DI), Y8
	VMOVUPD (Bank_z+32)(DI), Y9
	VMOVUPD (Bank_z+64)(DI), Y10
	VMOVUPD (Bank_z+96)(DI), Y11
	VMOVUPD (Bank_z+128)(DI), Y12
	VMOVUPD (Bank_z+160)(DI), Y13
	VMOVUPD (Bank_z+192)(DI), Y14
	VMOVUPD (Bank_z+224)(DI), Y15

four:
	VALUES(0, Y0)
	VALUES(1, Y1)
	VALUES(2, Y2)
	VALUES(3, Y3)
	TRANSPOSE
	VMOVUPD Y0, 0(SP)
	VMOVUPD Y1, 32(SP)
	VMOVUPD Y2, 64(SP)
	VMOVUPD Y3, 96(SP)
	VPCMPEQD Y7, Y7, Y7
	VPSLLQ $63, Y7, Y7
	SAMPLE(0, 4, 8)
	SAMPLE(1, 5, 9)
	SAMPLE(2, 6, 10)
	SAMPLE(3, 7, 11)
	GIVE(4, Bank_f)
	GIVE(8, Bank_g)
	ADDQ $4, SI
	CMPQ SI, CX
	JLT four

	VMOVUPD Y8, (Bank_z+0)(DI)
	VMOVUPD Y9, (Bank_z+32)(DI)
	VMOVUPD Y10, (Bank_z+64)(DI)
	VMOVUPD Y11, (Bank_z+96)(DI)
	VMOVUPD Y12, (Bank_z+128)(DI)
	VMOVUPD Y13, (Bank_z+160)(DI)
	VMOVUPD Y14, (Bank_z+192)(DI)
	VMOVUPD Y15, (Bank_z+224)(DI)
	VZEROUPPER
	RET
