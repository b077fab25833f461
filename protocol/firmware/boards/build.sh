#!/bin/sh
# Builds the images, and the host program, and says what they take.
#   sh boards/build.sh OUT_DIR [host] [arm] [avr]      (in protocol/firmware)
# A part whose compiler is missing is left out, and said so.
set -e
cd "$(dirname "$0")/.."
out=${1:?usage: sh boards/build.sh OUT_DIR [host] [arm] [avr]}
shift
parts=${*:-host arm avr}
wanted() { case " $parts " in *" $1 "*) ;; *) return 1 ;; esac; }
mkdir -p "$out"
warn="-Wall -Wextra -Wconversion -Wshadow -Wstrict-prototypes -Werror"
small="-Os -ffunction-sections -fdata-sections -Wl,--gc-sections"

if ! wanted host; then
	:
elif command -v gcc >/dev/null; then
	gcc -std=c99 -O2 -pedantic $warn -Icore -Ihost core/*.c host/*.c -lm -o "$out/gwhost"
	gcc -std=gnu99 -O2 $warn boards/bridge.c -o "$out/bridge"
	gcc -std=c99 -O2 -pedantic $warn -DGW_FIXED=1 -Icore -Ihost core/*.c host/*.c -lm -o "$out/gwhost-fixed"
else
	echo "gcc is missing: no host program"
fi

if ! wanted arm; then
	:
elif command -v arm-none-eabi-gcc >/dev/null; then
	arm() {
		arm-none-eabi-gcc -std=c99 -mcpu=cortex-m3 -mthumb -ffreestanding $warn $small -nostdlib "$@" \
			-Icore -Iboards/mps2-an385 -Iboards/common core/*.c boards/mps2-an385/main.c boards/common/motor.c -T boards/mps2-an385/image.ld -lgcc
	}
	arm -o "$out/an385.elf"
	arm -DBOARD_STEPPED=1 -o "$out/an385-stepped.elf"
	arm-none-eabi-size "$out/an385.elf"
else
	echo "arm-none-eabi-gcc is missing: no image for mps2-an385"
fi

if ! wanted avr; then
	:
elif command -v avr-gcc >/dev/null; then
	avr="avr-gcc -std=gnu99 -mmcu=atmega328p -DF_CPU=16000000UL $warn $small -flto -mcall-prologues -mrelax -mstrict-X"
	# Found by trying: each makes this core smaller with avr-gcc 5.4.
	avr="$avr -fno-move-loop-invariants -fno-tree-ter -fno-ipa-cp -fno-gcse -fno-split-wide-types -fno-inline-small-functions -fno-tree-pre -fno-tree-coalesce-vars -fno-tree-sink"
	avr="$avr -Icore -Iboards/atmega328p -Iboards/common"
	$avr -DBOARD_SIM=1 core/*.c boards/atmega328p/main.c boards/common/motor.c -o "$out/m328-sim.elf"
	$avr -DBOARD_SIM=1 -DGW_FIXED=1 core/*.c boards/atmega328p/main.c boards/common/motor.c -o "$out/m328-sim-fixed.elf"
	$avr core/*.c boards/atmega328p/main.c -o "$out/m328.elf"
	$avr -DGW_FIXED=1 core/*.c boards/atmega328p/main.c -o "$out/m328-fixed.elf"
	avr-size "$out/m328-sim.elf" "$out/m328-sim-fixed.elf" "$out/m328.elf" "$out/m328-fixed.elf"
	if [ -f /usr/include/simavr/sim_avr.h ] && command -v gcc >/dev/null; then
		gcc -std=gnu99 -O2 -Wall -Wextra -Werror boards/atmega328p/runner.c -lsimavr -lelf -o "$out/avrrun"
	else
		echo "libsimavr is missing: no runner for the ATmega328P"
	fi
else
	echo "avr-gcc is missing: no image for the ATmega328P"
fi
