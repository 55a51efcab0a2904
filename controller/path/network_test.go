package path

import (
	"math"
	"strconv"
	"strings"
	"testing"
)

// Three networks of the literature, as test data.
//
// nobel-us (14 sites of NSFNET, 21 links) and nobel-germany (17 sites, 26
// links): S. Orlowski, R. Wessäly, M. Pióro, A. Tomaszewski, "SNDlib 1.0 -
// Survivable Network Design Library", Networks 55(3), 2010: sites, links and
// demands. The first length of a link is the airline distance between the data
// set's own coordinates; the second is the length used in the literature: for
// nobel-us the rounded lengths of WDM papers, for nobel-germany the fibre
// route lengths (R. Huelsermann et al., 2004; values from memory, consistent
// with the airline lengths). Kilometres.
//
// cost239: edges after P. Batchelor et al., Photonic Network Communications
// 2(1), 2000 (from memory); lengths computed from city coordinates.
type network struct {
	sites   []string
	ends    [][2]int32
	airline []int64 // hundredths of a kilometre
	paper   []int64 // km
	demands []demand
}

type demand struct {
	a, b   int32
	volume int64
}

const nobelUSSites = `
N01 N02 N03 N04 N05 N06 N07 N08 N09 N10 N11 N12 N13 N14
`

const nobelUSLinks = `
N14,N01,1121.25,1100
N14,N02,1714.87,1600
N14,N06,2833.58,2800
N01,N02,704.13,600
N01,N13,975.47,1000
N02,N12,2108.66,2000
N13,N03,544.51,600
N13,N07,2348.18,2400
N03,N12,1482.54,1100
N03,N08,743.65,800
N12,N05,1131.68,1200
N12,N04,1952.11,2000
N08,N06,703.96,700
N06,N11,727.69,700
N11,N05,863.79,900
N11,N10,353.07,500
N11,N09,440.66,500
N07,N10,587.33,800
N07,N09,786.74,800
N10,N04,420.43,300
N04,N09,294.05,300
`

const nobelUSDemands = `
N01,N02:52;N03:18;N04:32;N05:64;N06:40;N07:34;N08:14;N09:16;N10:50;N11:40;N12:52;N13:22;N14:24
N02,N03:26;N04:46;N05:94;N06:58;N07:48;N08:20;N09:22;N10:74;N11:56;N12:76;N13:30;N14:32
N03,N04:22;N05:44;N06:30;N07:24;N08:12;N09:10;N10:34;N11:26;N12:40;N13:16;N14:14
N04,N05:122;N06:74;N07:70;N08:22;N09:60;N10:168;N11:194;N12:78;N13:24;N14:26
N05,N06:148;N07:126;N08:44;N09:54;N10:182;N11:144;N12:172;N13:46;N14:52
N06,N07:102;N08:34;N09:34;N10:114;N11:88;N12:102;N13:30;N14:34
N07,N08:26;N09:32;N10:110;N11:86;N12:84;N13:26;N14:28
N08,N09:10;N10:34;N11:26;N12:38;N13:12;N14:12
N09,N10:168;N11:236;N12:36;N13:12;N14:12
N10,N11:324;N12:122;N13:36;N14:42
N11,N12:94;N13:28;N14:32
N12,N13:40;N14:42
N13,N14:16
`

const germanySites = `
Hannover Frankfurt Hamburg Norden Bremen Berlin Muenchen Ulm Nuernberg Stuttgart Karlsruhe Mannheim Essen Dortmund Duesseldorf Koeln Leipzig
`

const germanyLinks = `
Hannover,Berlin,249.82,298
Hannover,Bremen,102.10,121
Hannover,Dortmund,186.74,208
Hannover,Frankfurt,262.53,316
Hannover,Hamburg,130.38,157
Hannover,Leipzig,212.21,258
Frankfurt,Koeln,145.38,182
Frankfurt,Leipzig,293.85,353
Frankfurt,Mannheim,73.32,85
Frankfurt,Nuernberg,189.94,224
Hamburg,Berlin,254.60,306
Hamburg,Bremen,99.83,114
Norden,Bremen,120.39,144
Norden,Dortmund,233.18,278
Berlin,Leipzig,151.38,174
Muenchen,Nuernberg,148.64,179
Muenchen,Ulm,118.78,143
Ulm,Stuttgart,73.81,86
Nuernberg,Leipzig,229.53,275
Nuernberg,Stuttgart,163.68,187
Stuttgart,Karlsruhe,60.56,74
Karlsruhe,Mannheim,53.70,64
Essen,Dortmund,34.15,37
Essen,Duesseldorf,28.85,36
Dortmund,Koeln,73.34,88
Duesseldorf,Koeln,37.04,41
`

const germanyDemands = `
Berlin,Bremen:4;Dortmund:4;Duesseldorf:4;Essen:4;Frankfurt:12;Hamburg:8;Hannover:8;Karlsruhe:2;Koeln:4;Leipzig:14;Mannheim:2;Muenchen:4;Nuernberg:4;Stuttgart:6;Ulm:4
Bremen,Dortmund:2;Duesseldorf:2;Essen:2;Frankfurt:6;Hamburg:6;Hannover:6;Karlsruhe:2;Koeln:2;Leipzig:4;Mannheim:2;Muenchen:2;Nuernberg:2;Stuttgart:2;Ulm:2
Dortmund,Duesseldorf:8;Essen:8;Frankfurt:10;Hamburg:4;Hannover:6;Karlsruhe:2;Koeln:6;Leipzig:6;Mannheim:2;Muenchen:4;Nuernberg:2;Stuttgart:4;Ulm:2
Duesseldorf,Essen:10;Frankfurt:12;Hamburg:4;Hannover:6;Karlsruhe:2;Koeln:12;Leipzig:6;Mannheim:2;Muenchen:4;Nuernberg:4;Stuttgart:4;Ulm:2
Essen,Frankfurt:8;Hamburg:4;Hannover:4;Karlsruhe:2;Koeln:6;Leipzig:4;Mannheim:2;Muenchen:2;Nuernberg:2;Stuttgart:4;Ulm:2
Frankfurt,Hamburg:12;Hannover:14;Karlsruhe:4;Koeln:12;Leipzig:18;Mannheim:10;Muenchen:10;Norden:50;Nuernberg:10;Stuttgart:14;Ulm:8
Hamburg,Hannover:10;Karlsruhe:2;Koeln:4;Leipzig:8;Mannheim:2;Muenchen:4;Nuernberg:4;Stuttgart:4;Ulm:4
Hannover,Karlsruhe:2;Koeln:6;Leipzig:10;Mannheim:4;Muenchen:4;Nuernberg:4;Stuttgart:6;Ulm:4
Karlsruhe,Koeln:2;Leipzig:2;Mannheim:2;Muenchen:2;Nuernberg:2;Stuttgart:4;Ulm:2
Koeln,Leipzig:6;Mannheim:2;Muenchen:4;Nuernberg:4;Stuttgart:4;Ulm:4
Leipzig,Mannheim:4;Muenchen:8;Nuernberg:6;Stuttgart:8;Ulm:6
Mannheim,Muenchen:2;Nuernberg:2;Stuttgart:4;Ulm:2
Muenchen,Nuernberg:6;Stuttgart:6;Ulm:6
Nuernberg,Stuttgart:6;Ulm:4
Stuttgart,Ulm:8
`

const cost239Sites = `
Paris Milan Zurich Prague Vienna Berlin Amsterdam Luxembourg Brussels London Copenhagen
`

const cost239Links = `
Paris,Milan,640
Paris,Zurich,488
Paris,Berlin,877
Paris,Luxembourg,287
Paris,Brussels,264
Paris,London,343
Milan,Zurich,219
Milan,Vienna,626
Milan,Brussels,698
Zurich,Prague,526
Zurich,Vienna,592
Zurich,Luxembourg,305
Prague,Vienna,253
Prague,Berlin,279
Prague,Copenhagen,634
Prague,Luxembourg,596
Vienna,Berlin,523
Berlin,Amsterdam,576
Berlin,Copenhagen,356
Amsterdam,Luxembourg,319
Amsterdam,Brussels,173
Amsterdam,London,358
Amsterdam,Copenhagen,621
Luxembourg,Brussels,187
Brussels,London,321
London,Copenhagen,956
`

var (
	nobelUS = parseNetwork(nobelUSSites, nobelUSLinks, nobelUSDemands)
	germany = parseNetwork(germanySites, germanyLinks, germanyDemands)
	cost239 = parseNetwork(cost239Sites, cost239Links, "")
)

func parseNetwork(sites, links, demands string) *network {
	n := &network{sites: strings.Fields(sites)}
	for _, line := range strings.Fields(links) {
		col := strings.Split(line, ",")
		n.ends = append(n.ends, [2]int32{n.site(col[0]), n.site(col[1])})
		n.airline = append(n.airline, hundredths(col[2]))
		if len(col) > 3 {
			n.paper = append(n.paper, hundredths(col[3])/100)
		}
	}
	for _, line := range strings.Fields(demands) {
		from, rest, _ := strings.Cut(line, ",")
		for _, d := range strings.Split(rest, ";") {
			to, volume, _ := strings.Cut(d, ":")
			n.demands = append(n.demands, demand{n.site(from), n.site(to), hundredths(volume) / 100})
		}
	}
	return n
}

// hundredths reads a decimal number times one hundred.
func hundredths(s string) int64 {
	x, err := strconv.ParseFloat(s, 64)
	if err != nil {
		panic(err)
	}
	return int64(math.Round(x * 100))
}

func (n *network) site(name string) int32 {
	for i, s := range n.sites {
		if s == name {
			return int32(i)
		}
	}
	panic("no site " + name)
}

// graph builds the network with the given lengths as costs.
func (n *network) graph(length []int64) *Graph {
	edges := make([]Edge, len(n.ends))
	for i, e := range n.ends {
		edges[i] = Edge{A: e[0], B: e[1], Cost: length[i]}
	}
	return NewGraph(len(n.sites), edges)
}

// names prints a route as site names joined by dashes.
func (n *network) names(r *Route) string {
	s := make([]string, len(r.Nodes))
	for i, v := range r.Nodes {
		s[i] = n.sites[v]
	}
	return strings.Join(s, "-")
}

// pairs calls visit for every unordered pair of sites.
func (n *network) pairs(visit func(a, b int32)) {
	for a := range int32(len(n.sites)) {
		for b := a + 1; b < int32(len(n.sites)); b++ {
			visit(a, b)
		}
	}
}

func near(t *testing.T, what string, got, want, tolerance float64) {
	t.Helper()
	if math.Abs(got-want) > tolerance {
		t.Errorf("%s = %v, want %v within %v", what, got, want, tolerance)
	}
}
