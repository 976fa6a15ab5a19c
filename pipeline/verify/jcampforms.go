package verify

import (
	"fmt"

	"pkvigil/parse"
	"pkvigil/parse/export"
)

// numberForms reads the published worked table in each of its number forms:
// all must give the same 53 ordinates.
func numberForms() []Check {
	g := group{name: "JCAMP-DX number forms", source: "McDonald & Wilks, Appl. Spectrosc. 42 (1988) 151, Table VI"}
	want := []float64{0, 0, 0, 0, 2, 4, 4, 4, 7, 5, 4, 4, 5, 5, 7, 10, 11, 11, 6, 5, 7, 6, 9, 9, 7, 10, 10, 9, 10, 11, 12, 15, 16, 16, 14, 17, 38, 38, 35, 38, 42, 47, 54, 59, 66, 75, 78, 88, 96, 104, 110, 121, 128}
	for _, f := range []struct{ name, body string }{
		{"packed", "599.860 0 0 0 0 2 4 4 4 7 5 4 4 5 5 7 10 11 11 6 5 7 6 9 9 7\n648.081 10 10 9 10 11 12 15 16 16 14 17 38 38 35 38 42 47 54\n682.799 59 66 75 78 88 96 104 110 121 128\n"},
		{"squeezed", "599.860@@@@BDDDGEDDEEGA0A1A1FEGFIIG\n648.081A0A0IA0A1A2A5A6A6A4A7C8C8C5C8D2D7E4\n682.799E9F6G5G8H8I6A04A10A21A28\n"},
		{"differences and repeats", "599.860@VKT%TLkj%J%KLJ%njKjL%kL%jJULJ%kLK1%lLMNPNPRLJ0QTOJ1P\n700.158A28\n"},
	} {
		read := func() (*parse.Content, error) {
			head := "##TITLE= TABLE VI\n##JCAMP-DX= 4.24\n##DATA TYPE= UV/VIS SPECTRUM\n##ORIGIN= published\n##OWNER= published\n##XUNITS= NANOMETERS\n##YUNITS= ABSORBANCE\n" +
				"##XFACTOR= 1\n##YFACTOR= 0.001\n##FIRSTX= 599.860\n##LASTX= 700.158\n##NPOINTS= 53\n##FIRSTY= 0.000\n##XYDATA= (X++(Y..Y))\n"
			c, err := export.Read("table.jdx", []byte(head+f.body+"##END=\n"), parse.Options{})
			if err == nil && len(c.Scans) != 1 {
				err = fmt.Errorf("%d scans", len(c.Scans))
			}
			return c, err
		}
		number := func(get func(s *parse.Scan) float64) func() (float64, error) {
			return func() (float64, error) {
				c, err := read()
				if err != nil {
					return 0, err
				}
				return get(&c.Scans[0]), nil
			}
		}
		g.try(f.name+", equal ordinates", 53, 0, number(func(s *parse.Scan) float64 {
			n := 0
			for i, a := range s.Absorbance {
				if i < len(want) && a-want[i]*0.001 < 1e-12 && want[i]*0.001-a < 1e-12 {
					n++
				}
			}
			return float64(n)
		}))
		g.try(f.name+", sum of the ordinates", 1.489, 1e-10, number(func(s *parse.Scan) float64 { return 53 * meanOf(s.Absorbance) }))
		g.try(f.name+", second abscissa", 601.788807692, 1e-8, number(func(s *parse.Scan) float64 { return s.WavelengthNM[1] }))
	}
	for _, f := range []struct{ name, body string }{
		{"Table VIIb, packed", "401+1+2+3+3+2+1+0-1-2-3"}, {"Table VIIb, squeezed", "401ABCCBA@abc"}, {"Table VIIb, differences", "401AJJ%jjjjjj\n410c"}, {"Table VIIb, differences and repeats", "401AJT%jX\n410c"},
	} {
		g.source = "McDonald & Wilks, Appl. Spectrosc. 42 (1988) 151, Table VIIb"
		g.try(f.name+", ordinates weighted by their place", -20, 1e-9, func() (float64, error) { return weighted(f.body) })
	}
	return g.list
}

// weighted reads ten ordinates at 401 to 410 nm and sums them with the weights
// 0, 1, ... 9, which tells their order.
func weighted(body string) (float64, error) {
	head := "##TITLE= TABLE VII\n##JCAMP-DX= 4.24\n##DATA TYPE= UV/VIS SPECTRUM\n##ORIGIN= published\n##OWNER= published\n##XUNITS= NANOMETERS\n##YUNITS= ABSORBANCE\n" +
		"##XFACTOR= 1\n##YFACTOR= 1\n##FIRSTX= 401\n##LASTX= 410\n##NPOINTS= 10\n##FIRSTY= 1\n##XYDATA= (X++(Y..Y))\n"
	c, err := export.Read("table.jdx", []byte(head+body+"\n##END=\n"), parse.Options{})
	if err != nil {
		return 0, err
	}
	sum := 0.0
	for i, a := range c.Scans[0].Absorbance {
		sum += float64(i) * a
	}
	return sum, nil
}
