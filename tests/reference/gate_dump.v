// A noise-shaping modulator of the first order at 10 MHz, invented, as a dump that quietedge reads:
//   iverilog -g2012 -o gate_dump gate_dump.v && vvp gate_dump
`timescale 1ns / 1ps
module modulator (input wire clock, input wire [7:0] wanted, output reg gate, output reg [7:0] rest);
  wire [8:0] sum = wanted + rest;
  always @(posedge clock) begin
    gate <= sum[8];
    rest <= sum[7:0];
  end
endmodule

module bench;
  reg clock = 0;
  reg [7:0] wanted = 77;
  real level;
  wire gate;
  wire [7:0] rest;
  modulator shaper (clock, wanted, gate, rest);
  always #50 clock = ~clock;
  always @(gate) level = gate * 0.5;
  initial begin
    $dumpfile("gate_dump.vcd");
    $dumpvars(0, bench);
    #120 force shaper.rest = 8'd0;
    #100 release shaper.rest;
    #3000 wanted = 200;
    #3000 $finish;
  end
endmodule
