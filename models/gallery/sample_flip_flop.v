// Holds one sample bit of the gauge: positive-edge D flip-flop of six NAND gates, preset and clear active low.
module sample_flip_flop (
    input  pre_n, clr_n, d, clk,
    output q, q_n
);
  wire a, b, c, e;
  nand (a, pre_n, e, b);
  nand (b, a, clr_n, clk);
  nand (c, b, clk, e);
  nand (e, c, clr_n, d);
  nand (q, pre_n, b, q_n);
  nand (q_n, q, clr_n, c);
endmodule
