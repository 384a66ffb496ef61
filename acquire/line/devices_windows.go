package line

import (
	"strings"

	"go.bug.st/serial/enumerator"
)

func listDevices() ([]Device, error) {
	ports, err := enumerator.GetDetailedPortsList()
	if err != nil {
		return nil, err
	}
	var found []Device
	for _, p := range ports {
		if p.Name == "" {
			continue
		}
		d := Device{Path: p.Name, Stable: p.Name}
		if p.IsUSB {
			d.VendorID, d.ProductID = strings.ToUpper(p.VID), strings.ToUpper(p.PID)
			d.SerialNumber, d.Manufacturer, d.Product = p.SerialNumber, p.Manufacturer, p.Product
		}
		found = append(found, d)
	}
	return found, nil
}
