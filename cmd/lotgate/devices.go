package main

import (
	"encoding/json"
	"fmt"

	"github.com/spf13/cobra"

	"lotgate/fixtures/serialline"
	"lotgate/fixtures/sound"
)

func (a *app) devices() *cobra.Command {
	var asJSON bool
	c := &cobra.Command{Use: "devices", Short: "List sound devices and serial ports", Args: exactly(cobra.NoArgs)}
	c.Flags().BoolVar(&asJSON, "json", false, "print one JSON object")
	c.RunE = func(*cobra.Command, []string) error {
		sounds, soundErr := sound.Devices()
		ports, portErr := serialline.Ports()
		if asJSON {
			out := map[string]any{"sound": sounds, "serial": ports}
			for key, err := range map[string]error{"sound_error": soundErr, "serial_error": portErr} {
				if err != nil {
					out[key] = err.Error()
				}
			}
			return json.NewEncoder(a.out).Encode(out)
		}
		fmt.Fprintln(a.out, "Sound devices")
		a.soundDevices(sounds, soundErr)
		fmt.Fprintln(a.out, "\nSerial ports")
		a.serialPorts(ports, portErr)
		return nil
	}
	return c
}

func (a *app) soundDevices(list []sound.DeviceInfo, err error) {
	if err != nil {
		fmt.Fprintln(a.out, "  none:", err)
		return
	}
	if len(list) == 0 {
		fmt.Fprintln(a.out, "  none: connect a sound interface")
	}
	fmt.Fprintln(a.out, "  (* is the system's default; a station file names a device by its name or id)")
	for _, d := range list {
		way, mark := "playback ", " "
		if d.Capture {
			way = "recording"
		}
		if d.Default {
			mark = "*"
		}
		rates := "any rate"
		if len(d.Rates) > 0 {
			rates = fmt.Sprintf("%v Hz", d.Rates)
		}
		fmt.Fprintf(a.out, "  %s %s  %-34s %s, up to %d channels, id %s\n", mark, way, d.Name, rates, d.Channels, d.ID)
	}
}

func (a *app) serialPorts(list []serialline.PortInfo, err error) {
	if err != nil {
		fmt.Fprintln(a.out, "  none:", err)
		return
	}
	if len(list) == 0 {
		fmt.Fprintln(a.out, "  none: connect the bench controller")
	}
	for _, p := range list {
		usb := "not USB"
		if p.USB {
			usb = fmt.Sprintf("USB %s:%s %s %s", p.Vendor, p.Product, p.Serial, p.Description)
		}
		fmt.Fprintf(a.out, "  %-20s %s\n", p.Name, usb)
	}
}
