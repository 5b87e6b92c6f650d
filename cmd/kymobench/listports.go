package main

import (
	"fmt"

	"github.com/spf13/cobra"

	"kymobench/bench/serialport"
)

func newPortsCommand(io streams) *cobra.Command {
	var asJSON bool
	cmd := &cobra.Command{
		Use:   "ports",
		Short: "List the serial ports that the system knows",
		Long: `Lists the serial ports, with the identity of a USB adapter where the system
tells it. None is opened: that would move its modem lines, which may drive a
valve. A port that is not listed can be named in a bench file all the same.`,
		Example: `  kymobench ports`,
		Args:    noArguments,
		RunE:    func(*cobra.Command, []string) error { return runPorts(asJSON, io) },
	}
	cmd.Flags().BoolVar(&asJSON, "json", false, "one JSON document on stdout")
	return cmd
}

type portDocument struct {
	Name         string `json:"name"`
	Stable       string `json:"stable_name"`
	USB          bool   `json:"usb"`
	Vendor       string `json:"usb_vendor"`
	Product      string `json:"usb_product"`
	SerialNumber string `json:"usb_serial_number"`
	Description  string `json:"description"`
}

func runPorts(asJSON bool, io streams) error {
	found, err := serialport.List()
	if err != nil {
		return fmt.Errorf("list the serial ports: %w", err)
	}
	if asJSON {
		d := struct {
			Schema string         `json:"schema"`
			Ports  []portDocument `json:"ports"`
		}{"kymobench/ports/1", []portDocument{}}
		for _, f := range found {
			d.Ports = append(d.Ports, portDocument(f))
		}
		return encode(io.out, d)
	}
	if len(found) == 0 {
		fmt.Fprintln(io.err, "the system lists no serial port; one that it does not list, such as a pseudo-terminal, can be named all the same")
		return nil
	}
	for _, f := range found {
		fmt.Fprintln(io.out, f.Name)
		if f.USB {
			fmt.Fprintf(io.out, "  USB %s:%s %s\n", f.Vendor, f.Product, f.Description)
			if f.SerialNumber == "" {
				fmt.Fprintln(io.out, "  the adapter has no serial number: it cannot be told from another of its kind")
			} else {
				fmt.Fprintf(io.out, "  serial number %s\n", f.SerialNumber)
			}
		}
		if f.Stable != "" {
			fmt.Fprintf(io.out, "  stays with the adapter as %s\n", f.Stable)
		}
	}
	return nil
}
