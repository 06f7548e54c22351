// Serial front end: eight probes of 12 bits each, one at a time, and a running mean for every probe.
module probe_mean (input clk, input rst_n, input take, input [11:0] sample, output [11:0] mean);
  // mean of 16 samples, leaking: sum <= sum - sum/16 + sample
  reg [15:0] sum;
  always @(posedge clk or negedge rst_n)
    if (!rst_n) sum <= 16'd0;
    else if (take) sum <= sum - {4'd0, sum[15:4]} + {4'd0, sample};
  assign mean = sum[15:4];
endmodule

module sampler (input clk, input rst_n, input probe_bit, input probe_strobe,
                output reg [2:0] channel, output done, output [95:0] means);
  reg [11:0] shift;
  reg [3:0] count;
  wire last = (count == 4'd11);
  assign done = probe_strobe & last & (channel == 3'd7);
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin shift <= 12'd0; count <= 4'd0; channel <= 3'd0; end
    else if (probe_strobe) begin
      shift <= {shift[10:0], probe_bit};
      count <= last ? 4'd0 : count + 4'd1;
      if (last) channel <= channel + 3'd1;
    end
  genvar i;
  generate for (i = 0; i < 8; i = i + 1) begin : probe
    probe_mean mean (.clk(clk), .rst_n(rst_n), .take(probe_strobe & last & (channel == i)),
                     .sample({shift[10:0], probe_bit}), .mean(means[12*i +: 12]));
  end endgenerate
endmodule
